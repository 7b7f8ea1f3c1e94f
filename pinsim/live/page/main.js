// Puts the page together: one bench, and everything that follows when it changes.
//
// state.js     what is drawn, what is pinned, undo, the address      api.js     every word with the server
// controls.js  the groups of controls, made of fields.js             print.js   the picture, divider, loupe, pointer
// box.js       the box cut open, to scale, with handles              figures.js figures, best hole, differences; plot.js
// photos.js    photos and maps chosen or dropped                     keep.js    designs and files in and out
// words.js     how figures are written; markup that escapes
//
// No figure is computed here: a length that is drawn is the design's own, everything else the server told.

import * as api from "./api.js";
import { BoxDrawing } from "./box.js";
import { buildControls, isPanorama } from "./controls.js";
import { Figures, showDifference } from "./figures.js";
import { setUpKeeping } from "./keep.js";
import { setUpPhotos } from "./photos.js";
import { Print, captionText } from "./print.js";
import { Bench, fromAddress, same, toAddress } from "./state.js";
import { holeText, short } from "./words.js";

const by = (id) => document.getElementById(id);
const UNSEEN = new Set(["pinned", "contrast", "name"]); // what changes nothing of the picture
const SCENE_KEYS = ["scene", "view_deg", "projection", "distance_mm", "map", "map_step", "map_kind", "map_unit", "ground", "horizon"];

class Latest {
  // Asks one thing at a time; of what is wished meanwhile only the newest is asked next.
  constructor(ask) {
    this.ask = ask;
    this.busy = false;
  }

  async want(...wish) {
    this.wish = wish;
    if (this.busy) return;
    this.busy = true;
    while (this.wish) {
      const now = this.wish;
      this.wish = null;
      try {
        await this.ask(...now);
      } catch (error) {
        // The picture asks with the same state and tells what is wrong; only a broken page must not stay silent.
        if (!(error instanceof api.Refused) && !(error instanceof api.Gone)) console.error(error);
      }
    }
    this.busy = false;
  }
}

function say(text) {
  // For screen readers, politely. A text that stays the same is not said again.
  if (by("live").textContent !== text) by("live").textContent = text;
}

function showError(text) {
  by("error").textContent = text || "";
  by("error").hidden = !text;
}

async function begin() {
  const start = await api.start();
  const told = fromAddress(location.hash, start.defaults);
  const bench = new Bench(told?.state ?? { ...start.defaults, ...start.state }, told?.pinned ?? null);
  const context = { scenes: [...start.scenes], maps: [], scene: null, rightTime: null };
  const sceneOf = (id) => context.scenes.find((scene) => scene.id === id) ?? null;
  context.scene = sceneOf(bench.state.scene);

  const figures = new Figures(bench, start);
  const print = new Print(bench, start, {
    say,
    shown(about, fine, state) {
      if (same(state, bench.state)) {
        showError("");
        controls.accept(bench.state, context);
      }
      by("caption").textContent = captionText(about);
      by("paper").setAttribute("aria-label", `The picture: ${about.description || captionText(about)}`);
      figures.picture(about);
      tell();
      if (!fine) return;
      if (same(state, bench.state)) rest(0); // the figures that take longer wait until the picture is there
      tellLater();
    },
    failed(error, state, which) {
      if (!which && !same(state, bench.state)) return;
      showError((which ? `${which}: ` : "") + error.message);
      if (error.errors || error.field) controls.refuse(error.errors ?? { [error.field]: error.message });
      tell();
      if (!which) rest(0);
      if (error.needs === "view" && !which) photos.askView(context.scene);
    },
  });
  print.context = context;
  const drawing = new BoxDrawing(bench, start, by("box-drawing"));
  const photos = setUpPhotos({ bench, context, showError, say, openDesign: (file) => keeping.open(file),
    added() { controls.show(bench.state, context); } });
  const controls = buildControls(bench, start, {
    photo: photos.choosePhoto,
    map: photos.chooseMap,
    // A light that came with the scene before says nothing about the next one.
    lightOf: (id) => (sceneOf(id)?.ev === null && sceneOf(id).width_px && bench.state.time ? { time: null, grain_seed: null } : {}),
  });
  const keeping = setUpKeeping({ bench, start, showError, say });

  // What follows a change

  const quick = new Latest(async (state) => {
    const answer = await api.numbers(state, "quick", "quick");
    figures.quick(answer);
    context.rightTime = answer.exposure?.time_s ?? null;
    by("stage").classList.toggle("panorama", isPanorama(state, context));
    print.figures = answer.figures;
    drawing.show(answer.figures);
  });
  const whole = new Latest(async (state, pinned) => {
    const [answer, curves] = await Promise.all([api.numbers(state, "all", "all"), api.curves(state, "now")]);
    if (!same(state, bench.state)) return;
    figures.all(answer);
    figures.curves(curves);
    figures.waiting(false);
    by("figures").dataset.state = JSON.stringify(state);
    if (!pinned) return showDifference(null);
    const difference = await api.difference(state, pinned);
    if (same(state, bench.state) && same(pinned, bench.pinned)) showDifference(difference);
  });
  const scene = new Latest(async (state) => {
    const answer = await api.check(state);
    const known = context.scenes.findIndex((s) => s.id === answer.scene.id);
    if (known < 0) context.scenes.push(answer.scene);
    else context.scenes[known] = answer.scene;
    if (bench.state.scene === answer.scene.id) context.scene = answer.scene;
    controls.show(bench.state, context);
  });

  let toldOf = null;
  const tell = () => {
    if (toldOf === bench.state) return;
    toldOf = bench.state;
    quick.want(bench.state);
  };
  let restTimer, addressTimer, tellTimer, byHand = false;
  const rest = (wait) => {
    clearTimeout(restTimer);
    restTimer = setTimeout(() => whole.want(bench.state, bench.pinned), wait);
  };
  const tellLater = () => {
    if (!byHand) return;
    clearTimeout(tellTimer);
    tellTimer = setTimeout(() => {
      byHand = false;
      const near = figures.figures?.distances?.[0];
      say([bench.state.shape === "round" ? `Hole ${holeText(bench.state.hole_mm)}, picture drawn.` : "Picture drawn.",
        near ? `Finest detail in the middle ${short(near.detail_cycles_mm)} cycles per mm.` : "",
        figures.exposure ? `Exposure ${figures.exposure.text}.` : ""].filter(Boolean).join(" "));
    }, 700);
  };

  function follow({ keys, by: who }) {
    byHand = true;
    showError("");
    if (keys.includes("scene")) context.scene = sceneOf(bench.state.scene);
    if (keys.some((key) => key !== "pinned")) figures.waiting(true);
    clearTimeout(restTimer);
    // The first figures follow the picture: computed beside it they would make it late.
    if (keys.some((key) => !UNSEEN.has(key))) print.draw(bench.state);
    else {
      tell();
      if (print.keep(bench.state)) rest(100);
    }
    print.drawPinned(bench.pinned, bench.state);
    if (keys.some((key) => SCENE_KEYS.includes(key))) scene.want(bench.state);
    if (who !== drawing) drawing.draw();
    controls.show(bench.state, context);
    pinButtons();
    clearTimeout(addressTimer);
    addressTimer = setTimeout(() => history.replaceState(null, "", toAddress(bench.state, bench.pinned, start.defaults)), 120);
  }

  function pinButtons() {
    by("pin").textContent = bench.pinned ? "Pin anew as A" : "Pin as A";
    by("save-comparison").disabled = !bench.pinned;
  }

  function stepButtons() {
    by("undo").disabled = !bench.past.length;
    by("redo").disabled = !bench.future.length;
  }

  bench.addEventListener("change", (event) => follow(event.detail));
  bench.addEventListener("steps", stepButtons);
  by("undo").addEventListener("click", () => bench.undo());
  by("redo").addEventListener("click", () => bench.redo());
  by("pin").addEventListener("click", () => { bench.pin(bench.state); say("Pinned as A. Change something: the divider shows A on the left."); });
  by("unpin").addEventListener("click", () => { bench.pin(null); by("pin").focus(); say("A is taken away."); });
  by("swap").addEventListener("click", () => {
    const { state, pinned } = bench;
    bench.replace(pinned, state, "swap");
    bench.settle();
  });
  for (const radio of document.querySelectorAll('[name="cut"]')) {
    radio.addEventListener("change", () => { drawing.above = by("cut-above").checked; drawing.draw(); });
  }
  by("cautions-open").addEventListener("click", () => by("cautions").showModal());
  by("cautions-close").addEventListener("click", () => by("cautions").close());
  document.addEventListener("keydown", (event) => {
    if (event.key === "l" && document.activeElement === by("paper") && !event.ctrlKey && !event.metaKey) print.loupe(!print.loupeOn);
    if (!(event.ctrlKey || event.metaKey) || event.altKey || document.querySelector("dialog[open]")) return;
    const name = event.key.toLowerCase();
    if (name !== "z" && name !== "y") return;
    if (event.target.matches('input[type="text"]') && event.target.dataset.dirty) return; // the browser's own undo of typing
    event.preventDefault();
    if (name === "y" || event.shiftKey) bench.redo();
    else bench.undo();
  });
  document.addEventListener("input", (event) => { if (event.target.matches('input[type="text"]')) event.target.dataset.dirty = "1"; });
  document.addEventListener("change", (event) => { if (event.target.matches('input[type="text"]')) delete event.target.dataset.dirty; });
  window.addEventListener("hashchange", () => {
    const again = fromAddress(location.hash, start.defaults);
    if (again && !(same(again.state, bench.state) && same(again.pinned, bench.pinned))) {
      bench.replace(again.state, again.pinned, "address");
      bench.settle();
    }
  });

  // The first look
  print.draw(bench.state);
  print.drawPinned(bench.pinned, bench.state);
  controls.show(bench.state, context);
  pinButtons();
  // The figures come with the picture.
  scene.want(bench.state);
  history.replaceState(null, "", toAddress(bench.state, bench.pinned, start.defaults));
  window.pinsimState = () => bench.state; // for whoever looks from the browser's console, and for the checks
  document.documentElement.dataset.ready = "yes";
}

begin().catch((error) => {
  showError(error.message);
  if (!(error instanceof api.Refused) && !(error instanceof api.Gone)) throw error;
});
