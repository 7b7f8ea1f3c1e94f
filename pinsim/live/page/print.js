// The picture on the bench: drawn coarse while the hand moves and fine when it rests, never older than what is shown;
// A beside it under a divider; true size; loupe; distance and direction under the pointer; looking around in panoramas.

import * as api from "./api.js";
import { isPanorama } from "./controls.js";
import { degText, distanceText, lengthText, mmText, stopsText } from "./words.js";

const REST_MS = 40; // a hand that has not moved for so long rests: time for the fine picture
const CARD_MM = 85.6; // ISO/IEC 7810 ID-1
const LOUPE_TIMES = 4;
const by = (id) => document.getElementById(id);

class Painter {
  // Keeps one canvas up to date with a state. One coarse picture is under way at a time, so that a long drag
  // shows pictures all along; the newest wish waits, all between are dropped. A fine one under way is stopped.
  constructor(canvas, lane, widths, tell) {
    Object.assign(this, { canvas, lane, widths, tell });
    this.wish = null;
    this.wishCount = 0;
    this.shownCount = 0;
    this.busy = false;
  }

  want(state) {
    this.wish = state;
    this.wishCount += 1;
    this.wishTime = performance.now();
    clearTimeout(this.timer);
    if (this.fine) this.fine.abort();
    if (!this.busy) this.#coarse();
  }

  keep(state) {
    // The fine picture shown is that of this state too; returns whether nothing needs to be drawn.
    if (this.busy || this.fine || this.failed || this.canvas.dataset.quality !== "fine") {
      this.want(state);
      return false;
    }
    this.wish = state;
    this.canvas.dataset.state = JSON.stringify(state);
    return true;
  }

  stop() {
    this.wish = null;
    clearTimeout(this.timer);
    if (this.fine) this.fine.abort();
  }

  async #coarse() {
    this.busy = true;
    let tried = 0;
    while (this.wish && tried !== this.wishCount) {
      tried = this.wishCount;
      await this.#draw(this.wish, tried, "coarse", undefined);
    }
    this.busy = false;
    if (this.wish && !this.failed) this.timer = setTimeout(() => this.#fine(), Math.max(0, REST_MS - (performance.now() - this.wishTime)));
  }

  async #fine() {
    const fine = new AbortController();
    this.fine = fine;
    await this.#draw(this.wish, this.wishCount, "fine", fine.signal);
    if (this.fine === fine) this.fine = null;
  }

  async #draw(state, count, quality, signal) {
    try {
      const { bitmap, about } = await api.picture(state, this.widths[quality], this.lane, signal);
      if (count < this.shownCount || !this.wish) return bitmap.close();
      this.shownCount = count;
      this.failed = false;
      this.#show(bitmap, about, quality === "fine", state);
    } catch (error) {
      if (error.name === "AbortError" || error.superseded) return;
      if (count !== this.wishCount) return; // a later wish is on its way; its answer counts
      this.failed = true;
      this.tell.failed(error, state);
    }
  }

  #show(bitmap, about, fine, state) {
    if (this.canvas.width !== bitmap.width || this.canvas.height !== bitmap.height) {
      this.canvas.width = bitmap.width;
      this.canvas.height = bitmap.height;
    }
    this.canvas.getContext("2d").drawImage(bitmap, 0, 0);
    bitmap.close();
    this.about = about;
    this.widths = about.widths_px ?? this.widths; // a long film wants more across
    this.canvas.dataset.state = JSON.stringify(state);
    this.canvas.dataset.quality = fine ? "fine" : "coarse";
    this.canvas.dataset.shown = String(Number(this.canvas.dataset.shown || 0) + 1);
    this.tell.shown(about, fine, state);
  }
}

export class Print {
  constructor(bench, start, tell) {
    this.bench = bench;
    this.tell = tell;
    this.context = { scene: null };
    this.figures = null;
    this.canvas = by("picture");
    this.paper = by("paper");
    this.place = null; // where the pointer is, 0..1 of the picture
    const widths = start.widths_px;
    this.now = new Painter(this.canvas, "now", widths, {
      shown: (about, fine, state) => { this.#size(about); this.#drawLoupe(); tell.shown(about, fine, state); },
      failed: (error, state) => tell.failed(error, state),
    });
    this.other = new Painter(by("pinned"), "a", widths, {
      shown: () => { by("pinned").hidden = !this.bench.pinned; this.#drawLoupe(); },
      failed: (error, state) => tell.failed(error, state, "A"),
    });
    this.#pointer();
    this.#divider();
    this.#calibration();
    by("loupe-toggle").addEventListener("click", () => this.loupe(!this.loupeOn));
    new ResizeObserver(() => this.#size(this.now.about)).observe(by("stage"));
  }

  draw(state) { this.now.want(state); }
  keep(state) { return this.now.keep(state); }

  drawPinned(pinned, state) {
    const on = pinned !== null;
    for (const id of ["divider", "tag-a", "tag-b", "swap", "unpin"]) by(id).hidden = !on;
    if (!on) {
      by("pinned").hidden = true;
      this.other.stop();
      this.wasPinned = null;
      return;
    }
    // A is looked at from the same side as the present picture, else nothing lies on the same place.
    const wish = { ...pinned, look: state.look };
    const key = JSON.stringify(wish);
    if (key === this.wasPinned) return;
    this.wasPinned = key;
    this.other.want(wish);
  }

  // Size on the bench

  get pxPerMm() { return Number(localStorage.getItem("pinsim-px-per-mm")) || 0; }

  trueSize(on) {
    this.trueOn = on;
    by("true-size").setAttribute("aria-pressed", String(on));
    by("stage").classList.toggle("true", on);
    by("size-again").hidden = !on;
    this.#size(this.now.about);
  }

  #size(about) {
    if (!about) return;
    const stage = by("stage");
    const border = 2 * parseFloat(getComputedStyle(by("print")).paddingLeft);
    let width;
    if (this.trueOn && this.pxPerMm) width = about.width_mm * this.pxPerMm;
    else {
      const room = { width: stage.clientWidth - border - 32, height: stage.clientHeight - border - 32 };
      width = Math.min(room.width, room.height * about.width_mm / about.height_mm);
    }
    width = Math.max(width, 24);
    this.paper.style.width = `${width}px`;
    this.paper.style.height = `${width * about.height_mm / about.width_mm}px`;
  }

  #calibration() {
    const dialog = by("size-dialog");
    const width = by("card-width");
    const bar = by("card-bar");
    const show = () => {
      bar.style.width = `${width.value}px`;
      width.setAttribute("aria-valuetext", `${width.value} pixels of the page`);
    };
    width.addEventListener("input", show);
    bar.addEventListener("pointermove", (event) => {
      if (!event.buttons) return;
      width.value = event.clientX - bar.getBoundingClientRect().left;
      show();
    });
    bar.addEventListener("pointerdown", (event) => bar.setPointerCapture(event.pointerId));
    by("true-size").addEventListener("click", () => {
      if (this.trueOn) return this.trueSize(false);
      if (this.pxPerMm) return this.trueSize(true);
      return this.calibrate();
    });
    by("size-done").addEventListener("click", () => {
      localStorage.setItem("pinsim-px-per-mm", String(Number(width.value) / CARD_MM));
      dialog.close();
      this.trueSize(true);
    });
    by("size-cancel").addEventListener("click", () => dialog.close());
    by("size-again").addEventListener("click", () => this.calibrate());
    this.calibrate = () => {
      width.value = (this.pxPerMm || 96 / 25.4) * CARD_MM;
      show();
      dialog.showModal();
    };
  }

  // The divider between A and now

  #divider() {
    const divider = by("divider");
    const set = (share) => {
      const at = Math.min(100, Math.max(0, share));
      divider.setAttribute("aria-valuenow", String(Math.round(at)));
      divider.setAttribute("aria-valuetext", `A on ${Math.round(at)} % from the left`);
      divider.style.left = `${at}%`;
      by("pinned").style.clipPath = `inset(0 ${100 - at}% 0 0)`;
      this.share = at / 100;
    };
    set(50);
    divider.addEventListener("pointerdown", (event) => { divider.setPointerCapture(event.pointerId); event.preventDefault(); divider.focus(); });
    divider.addEventListener("pointermove", (event) => {
      if (!divider.hasPointerCapture(event.pointerId)) return;
      const box = this.paper.getBoundingClientRect();
      set(100 * (event.clientX - box.left) / box.width);
    });
    divider.addEventListener("keydown", (event) => {
      const steps = { ArrowLeft: -2, ArrowDown: -2, ArrowRight: 2, ArrowUp: 2, PageDown: -10, PageUp: 10, Home: -100, End: 100 };
      if (!(event.key in steps)) return;
      event.preventDefault();
      event.stopPropagation();
      set(100 * this.share + steps[event.key]);
    });
  }

  // The pointer: distance and direction, the loupe, looking around

  #pointer() {
    const paper = this.paper;
    const where = (event) => {
      const box = paper.getBoundingClientRect();
      return [(event.clientX - box.left) / box.width, (event.clientY - box.top) / box.height];
    };
    const inside = ([x, y]) => x >= 0 && x <= 1 && y >= 0 && y <= 1;
    let drag = null;
    paper.addEventListener("pointerdown", (event) => {
      if (event.target !== paper && event.target.tagName !== "CANVAS") return;
      this.#point(where(event));
      if (!isPanorama(this.bench.state, this.context)) return;
      const { yaw_deg: yaw, pitch_deg: pitch } = this.bench.state;
      drag = { x: event.clientX, y: event.clientY, yaw: yaw ?? 0, pitch: pitch ?? 0 };
      paper.setPointerCapture(event.pointerId);
    });
    paper.addEventListener("pointermove", (event) => {
      if (drag) {
        const box = paper.getBoundingClientRect();
        this.#turn(drag.yaw, drag.pitch, (drag.x - event.clientX) / box.width, (event.clientY - drag.y) / box.height, true);
      } else if (inside(where(event))) this.#point(where(event));
    });
    const end = () => { if (drag) { drag = null; this.bench.settle("look-around"); } };
    paper.addEventListener("pointerup", end);
    paper.addEventListener("pointercancel", end);
    paper.addEventListener("pointerleave", () => { if (document.activeElement !== paper) this.#leave(); });
    paper.addEventListener("blur", () => this.#leave());
    paper.addEventListener("keydown", (event) => {
      if (event.target !== paper) return;
      const ways = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] };
      const way = ways[event.key];
      if (!way) return;
      event.preventDefault();
      if (event.shiftKey && isPanorama(this.bench.state, this.context)) {
        const { yaw_deg: yaw, pitch_deg: pitch } = this.bench.state;
        this.#turn(yaw ?? 0, pitch ?? 0, 0.05 * way[0], -0.05 * way[1], false);
        return;
      }
      const [x, y] = this.place || [0.5, 0.5];
      const far = this.place ? 0.02 : 0;
      this.#point([Math.min(1, Math.max(0, x + far * way[0])), Math.min(1, Math.max(0, y + far * way[1]))], true);
    });
  }

  #turn(yaw, pitch, right, up, moving) {
    // right, up: parts of the picture's width and height, as shown. One width is the view's own angle.
    const { look } = this.bench.state;
    const across = this.figures?.horizontal_view_deg ?? 50;
    const high = this.figures?.vertical_view_deg ?? 50;
    const sideways = look === "screen" ? -1 : 1;
    const upright = look === "upright" ? 1 : -1;
    const turned = ((yaw + sideways * right * across + 540) % 360 + 360) % 360 - 180;
    const raised = Math.min(90, Math.max(-90, pitch + upright * up * high));
    this.bench.change({ yaw_deg: Number(turned.toFixed(1)), pitch_deg: Number(raised.toFixed(1)) }, { moving: true });
    if (!moving) this.bench.settle("turn");
  }

  #leave() {
    this.place = null;
    by("cross").hidden = true;
    by("loupe").hidden = true;
    by("probe").textContent = "";
  }

  #point(place, spoken = false) {
    this.place = place;
    const cross = by("cross");
    cross.hidden = false;
    cross.style.left = `${100 * place[0]}%`;
    cross.style.top = `${100 * place[1]}%`;
    this.#drawLoupe();
    this.spoken = spoken;
    if (!this.asking) this.#ask();
  }

  async #ask() {
    this.asking = true;
    let asked = null;
    while (this.place && this.place !== asked) {
      asked = this.place;
      try {
        const found = await api.point(this.bench.state, asked[0], asked[1]);
        if (!this.place) break;
        by("probe").textContent = pointText(found);
        if (this.spoken && this.place === asked) this.tell.say(pointText(found));
      } catch (error) {
        if (this.place) by("probe").textContent = "";
        break;
      }
    }
    this.asking = false;
  }

  loupe(on) {
    this.loupeOn = on;
    by("loupe-toggle").setAttribute("aria-pressed", String(on));
    if (on && !this.place) this.#point([0.5, 0.5]);
    this.#drawLoupe();
  }

  #drawLoupe() {
    const loupe = by("loupe");
    loupe.hidden = !(this.loupeOn && this.place);
    if (loupe.hidden) return;
    const sharp = window.devicePixelRatio || 1;
    const size = loupe.clientWidth;
    const box = this.paper.getBoundingClientRect();
    if (loupe.width !== Math.round(size * sharp)) loupe.width = loupe.height = Math.round(size * sharp);
    const [x, y] = this.place;
    const source = this.bench.pinned && !by("pinned").hidden && x < this.share ? by("pinned") : this.canvas;
    const drawing = loupe.getContext("2d");
    const part = { width: source.width * size / (LOUPE_TIMES * box.width), height: source.height * size / (LOUPE_TIMES * box.height) };
    drawing.imageSmoothingQuality = "high";
    drawing.fillStyle = "#777";
    drawing.fillRect(0, 0, loupe.width, loupe.height);
    drawing.drawImage(source, x * source.width - part.width / 2, y * source.height - part.height / 2, part.width, part.height, 0, 0, loupe.width, loupe.height);
    const print = by("print").getBoundingClientRect();
    const away = x < 0.5 ? 24 : -24 - size; // beside the pointer, on the side where there is room
    loupe.style.left = `${box.left - print.left + x * box.width + away}px`;
    loupe.style.top = `${Math.max(0, Math.min(print.height - size, box.top - print.top + y * box.height - size / 2))}px`;
  }
}

function pointText(found) {
  if (found.covered === false) return "The photo does not reach here";
  const sideways = Math.abs(found.right_deg) < 0.05 ? "" : `${degText(Math.abs(found.right_deg))} ${found.right_deg > 0 ? "right" : "left"}`;
  const upright = Math.abs(found.up_deg) < 0.05 ? "" : `${degText(Math.abs(found.up_deg))} ${found.up_deg > 0 ? "up" : "down"}`;
  const parts = [
    found.distance_text || (found.distance_mm === null ? "" : distanceText(found.distance_mm)),
    [sideways, upright].filter(Boolean).join(", ") || "on the hole's axis",
    found.falloff_stops === null || found.falloff_stops === "infinity" ? "no light" : stopsText(found.falloff_stops),
  ];
  return parts.filter(Boolean).join(" \u00b7 ");
}

export const captionText = (about) => `${mmText(about.width_mm)} x ${mmText(about.height_mm)} of film`;
export { lengthText };
