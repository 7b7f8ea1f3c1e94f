"use strict";
(() => {
  const byId = (id) => document.getElementById(id);
  const stage = byId("stage"), divider = byId("divider"), ring = byId("ring"), status = byId("status");
  const pictures = [...stage.querySelectorAll("img")];
  const letters = pictures.map((one) => one.dataset.letter);
  const details = [...document.querySelectorAll("button[data-place]")];
  const canvases = [byId("loupe-left"), byId("loupe-right")];
  const chosen = [0, 1];
  const usual = [Number(stage.dataset.side), Number(stage.dataset.side) * Number(stage.dataset.aspect)];
  let at = 50, place = null, zoom = 1, current = -1;

  const between = (value, low, high) => Math.min(Math.max(value, low), high);

  function showDivider() {
    stage.style.setProperty("--at", `${at}%`);
    divider.setAttribute("aria-valuenow", String(Math.round(at)));
    const [left, right] = chosen.map((one) => letters[one]);
    const shown = Math.round(at);
    divider.setAttribute("aria-valuetext", `${shown} percent ${left}, ${100 - shown} percent ${right}`);
  }

  function moveDivider(to) {
    at = between(to, 0, 100);
    showDivider();
  }

  function showPair() {
    pictures.forEach((picture, i) => {
      picture.classList.toggle("over", i === chosen[0]);
      picture.classList.toggle("under", i === chosen[1]);
      picture.setAttribute("aria-hidden", String(!chosen.includes(i)));
    });
    ["left", "right"].forEach((side, i) => {
      byId(`tag-${side}`).textContent = letters[chosen[i]];
      byId(`loupe-letter-${side}`).textContent = letters[chosen[i]];
    });
    showDivider();
    drawLoupe();
  }

  // The loupe: the same place of both pictures. place: [x, y], shares of the picture.
  function field() {
    return usual.map((share) => between(share / zoom, 0.01, 1));
  }

  function drawLoupe() {
    const [wide, high] = field();
    const here = place || [0.5, 0.5];
    const x = between(here[0], wide / 2, 1 - wide / 2);
    const y = between(here[1], high / 2, 1 - high / 2);
    canvases.forEach((canvas, i) => {
      const picture = pictures[chosen[i]];
      const size = Math.max(1, Math.round(canvas.clientWidth * Math.min(window.devicePixelRatio || 1, 3)));
      canvas.width = canvas.height = size;
      if (!picture.naturalWidth) return;
      const pen = canvas.getContext("2d");
      pen.imageSmoothingQuality = "high";
      pen.drawImage(
        picture,
        (x - wide / 2) * picture.naturalWidth, (y - high / 2) * picture.naturalHeight,
        wide * picture.naturalWidth, high * picture.naturalHeight, 0, 0, size, size,
      );
      canvas.setAttribute("aria-label", `${letters[chosen[i]]}, enlarged: ${where()}`);
    });
    ring.hidden = place === null;
    ring.style.left = `${100 * (x - wide / 2)}%`;
    ring.style.top = `${100 * (y - high / 2)}%`;
    ring.style.width = `${100 * wide}%`;
    ring.style.height = `${100 * high}%`;
  }

  function where() {
    if (current >= 0) return details[current].dataset.words;
    if (place === null) return "the middle of the picture";
    const [x, y] = place;
    return `${Math.round(100 * x)} percent from the left, ${Math.round(100 * y)} percent from the top`;
  }

  function press(number) {
    current = number;
    details.forEach((one, i) => one.setAttribute("aria-pressed", String(i === number)));
  }

  function showDetail(number) {
    press((number + details.length) % details.length);
    const told = details[current];
    place = told.dataset.place.split(",").map(Number);
    zoom = 1;
    drawLoupe();
    status.textContent = told.dataset.told;
  }

  function showPlace(x, y) {
    press(-1);
    place = [between(x, 0, 1), between(y, 0, 1)];
    drawLoupe();
    // Not said aloud at every step of the pointer: it follows what the hand does.
    status.textContent = status.dataset.start;
  }

  function reset() {
    press(-1);
    place = null;
    zoom = 1;
    status.textContent = status.dataset.start;
    drawLoupe();
    moveDivider(50);
  }

  function shareOf(event) {
    const box = stage.getBoundingClientRect();
    return [(event.clientX - box.left) / box.width, (event.clientY - box.top) / box.height];
  }

  divider.addEventListener("pointerdown", (event) => {
    if (event.button !== 0) return;
    divider.setPointerCapture(event.pointerId);
    divider.focus({ preventScroll: true });
    event.preventDefault();
    event.stopPropagation();
  });
  divider.addEventListener("pointermove", (event) => {
    if (!divider.hasPointerCapture(event.pointerId)) return;
    moveDivider(100 * shareOf(event)[0]);
    event.stopPropagation();
  });
  stage.addEventListener("pointerdown", (event) => {
    showPlace(...shareOf(event));
    divider.focus({ preventScroll: true });
    if (event.pointerType === "mouse") event.preventDefault();
  });
  stage.addEventListener("pointermove", (event) => {
    if (event.target !== divider) showPlace(...shareOf(event));
  });

  const steps = { ArrowLeft: -1, ArrowDown: -1, ArrowRight: 1, ArrowUp: 1, PageDown: -10, PageUp: 10 };
  divider.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey) return;
    if (event.key in steps) moveDivider(at + steps[event.key] * (event.shiftKey ? 10 : 1));
    else if (event.key === "Home") moveDivider(0);
    else if (event.key === "End") moveDivider(100);
    else return;
    event.preventDefault();
    event.stopPropagation();
  });
  // Letters act only while the viewer has the focus, so that they disturb nobody who speaks to the page.
  byId("viewer").addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey || event.target.tagName === "SELECT") return;
    const key = event.key.toLowerCase();
    if (key === "n") showDetail(current + 1);
    else if (key === "p") showDetail(current < 0 ? details.length - 1 : current - 1);
    else if (key >= "1" && key <= "9" && Number(key) <= details.length) showDetail(Number(key) - 1);
    else if (key === "+" || key === "=") enlarge(1.5);
    else if (key === "-") enlarge(1 / 1.5);
    else return;
    event.preventDefault();
  });
  document.addEventListener("keydown", (event) => {
    if (event.key === "Escape") reset();
    else if (event.target === document.body && (event.key === "ArrowLeft" || event.key === "ArrowRight")) {
      if (event.ctrlKey || event.metaKey || event.altKey) return;
      moveDivider(at + steps[event.key] * (event.shiftKey ? 10 : 1));
      event.preventDefault();
    }
  });

  function enlarge(factor) {
    zoom = between(zoom * factor, 0.3, 6);
    drawLoupe();
  }

  details.forEach((one, i) => one.addEventListener("click", () => showDetail(i)));
  byId("larger").addEventListener("click", () => enlarge(1.5));
  byId("smaller").addEventListener("click", () => enlarge(1 / 1.5));
  byId("reset").addEventListener("click", reset);
  ["left", "right"].forEach((side, i) => {
    const select = byId(`choose-${side}`);
    if (!select) return;
    select.addEventListener("change", () => {
      const wanted = Number(select.value);
      // Two of the same would show nothing: the other side takes what this one had.
      if (wanted === chosen[1 - i]) {
        chosen[1 - i] = chosen[i];
        byId(`choose-${side === "left" ? "right" : "left"}`).value = String(chosen[i]);
      }
      chosen[i] = wanted;
      showPair();
    });
  });

  document.documentElement.style.setProperty("--aspect", stage.dataset.aspect);
  document.documentElement.classList.add("live");
  Promise.all(pictures.map((one) => one.decode().catch(() => undefined))).then(drawLoupe);
  new ResizeObserver(drawLoupe).observe(byId("loupe"));
  status.textContent = status.dataset.start;
  showPair();
})();
