// A photo of the builder's own, and a map of its distances: chosen, or dropped on the page.

import * as api from "./api.js";
import { degText, lengthText } from "./words.js";
import { make } from "./fields.js";

const by = (id) => document.getElementById(id);
const MAP_NAMES = /(dist|depth|map|disp)/i;
const ARRAYS = /\.(npy|npz)$/i;

export function setUpPhotos({ bench, context, showError, say, openDesign, added }) {
  const file = (accept, label) => {
    const input = make("input", { type: "file", accept, hidden: true });
    input.setAttribute("aria-label", label);
    document.body.append(input);
    return input;
  };
  const photoFile = file("image/*,.heic,.heif,.hif,.exr,.hdr,.dng,.nef,.cr2,.cr3,.arw,.raf,.orf,.rw2,.tif,.tiff", "Photo");
  const mapFile = file(".png,.tif,.tiff,.npy,.npz,.exr,.pfm,.hdr", "Distance map");
  photoFile.id = "photo-file";
  mapFile.id = "map-file";
  const upload = async (what, chosen) => {
    try {
      say(`${chosen.name} is being read.`);
      document.documentElement.classList.add("reading");
      await what(chosen);
    } catch (error) {
      showError(error.message);
    } finally {
      document.documentElement.classList.remove("reading");
    }
  };
  photoFile.addEventListener("change", () => { if (photoFile.files[0]) upload(takePhoto, photoFile.files[0]); photoFile.value = ""; });
  mapFile.addEventListener("change", () => { if (mapFile.files[0]) upload(takeMap, mapFile.files[0]); mapFile.value = ""; });

  async function takePhoto(chosen, map = null) {
    const scene = await api.sendPhoto(chosen);
    context.scenes = [...context.scenes.filter((s) => s.id !== scene.id), scene];
    added();
    if (scene.needs === "view") return askView(scene, map);
    use(scene, map ? meaning(map) : {});
    say(scene.view_deg ? `${scene.name}: angle of view ${degText(scene.view_deg)}, read from the photo.` : `${scene.name} is used.`);
  }

  function use(scene, more) {
    bench.change({ scene: scene.id, view_deg: null, projection: null, distance_mm: null, map: null, ground: null, horizon: null,
      yaw_deg: null, pitch_deg: null, roll_deg: null, light: null,
      ...(scene.ev === null || scene.ev === undefined ? { time: null, grain_seed: null } : {}), ...more });
  }

  async function sendMap(chosen) {
    const map = await api.sendMap(chosen);
    context.maps = [...context.maps.filter((m) => m.id !== map.id), map];
    added();
    return map;
  }

  function meaning(map) {
    // Whole numbers need a step; until it is told one is a millimetre, and the page says so.
    return { map: map.id, distance_mm: null, ground: null, horizon: null,
      ...(map.kind_of_numbers === "codes" ? { map_step: bench.state.map_step ?? "1 mm" } : { map_unit: bench.state.map_unit ?? "m" }) };
  }

  async function takeMap(chosen) {
    const map = await sendMap(chosen);
    bench.change(meaning(map));
    tellMap(map);
  }

  function tellMap(map) {
    say(map.kind_of_numbers === "codes" ? "The map is used; look whether one of its values means what stands beside it." : `${map.name} is used.`);
  }

  // The angle of view, when the photo does not tell it

  const dialog = by("photo-dialog");
  let asked = null;
  let askedMap = null;
  const inputs = {};
  for (const [key, label, value, hint] of [
    ["view", "Angle of view, from its left edge to its right", "", "Such as 65 deg. A phone's main camera sees about 65 to 70 deg, held upright about 52 deg. A full turn is a panorama: 360 deg."],
    ["distance", "How far everything is", "infinity", "Such as 4 m, or infinity. A map can be added later."],
  ]) {
    const id = `photo-${key}`;
    inputs[key] = make("input", { type: "text", id, value, autocomplete: "off", spellcheck: false });
    const text = make("p", { className: "hint", id: `${id}-hint`, textContent: hint });
    inputs[key].setAttribute("aria-describedby", text.id);
    by("photo-fields").append(make("div", { className: "field" }, make("label", { htmlFor: id, textContent: label }), inputs[key], text));
  }

  function askView(scene, map = null) {
    if (!scene || dialog.open) return;
    asked = scene;
    askedMap = map;
    inputs.distance.closest(".field").hidden = map !== null;
    by("photo-name").textContent = `${scene.name}${scene.width_px ? `, ${scene.width_px} x ${scene.height_px} pixels` : ""}: the photo does not tell how wide it sees.`;
    by("photo-error").hidden = true;
    dialog.showModal();
    inputs.view.focus();
  }

  by("photo-form").addEventListener("submit", async (event) => {
    event.preventDefault();
    try {
      const view = await api.parse("angle", inputs.view.value, "view_deg");
      const distance = await api.parse("distance", inputs.distance.value, "distance_mm");
      const state = { scene: asked.id, view_deg: view.value, ...(view.value >= 360 ? { view_deg: null, projection: "equirectangular" } : {}),
        ...(askedMap ? meaning(askedMap) : { map: null, distance_mm: distance.value === null ? "infinity" : distance.value }) };
      await api.check({ ...bench.state, ground: null, horizon: null, light: null, time: null, grain_seed: null, yaw_deg: null, pitch_deg: null, roll_deg: null, projection: null, ...state });
      dialog.close();
      use(asked, state);
      if (askedMap) tellMap(askedMap);
      else say(`${asked.name} is used, ${degText(view.value)} wide, ${lengthText(state.distance_mm)}.`);
    } catch (error) {
      by("photo-error").textContent = error.message;
      by("photo-error").hidden = false;
    }
  });
  by("photo-cancel").addEventListener("click", () => dialog.close());

  // Dropping

  let over = 0;
  const hint = (on) => { by("drop-hint").hidden = !on; };
  document.addEventListener("dragenter", (event) => { event.preventDefault(); over += 1; hint(true); });
  document.addEventListener("dragleave", () => { over -= 1; if (over <= 0) { over = 0; hint(false); } });
  document.addEventListener("dragover", (event) => event.preventDefault());
  document.addEventListener("drop", async (event) => {
    event.preventDefault();
    over = 0;
    hint(false);
    const files = [...event.dataTransfer.files];
    const designs = files.filter((f) => /\.toml$/i.test(f.name));
    const pictures = files.filter((f) => !designs.includes(f));
    // Of two files the one whose name says so, or an array, is the map; one that stands alone too.
    const map = pictures.find((f) => ARRAYS.test(f.name)) ?? pictures.find((f) => MAP_NAMES.test(f.name));
    const photo = pictures.find((f) => f !== map);
    if (photo && map) await upload(async (file) => takePhoto(file, await sendMap(map)), photo);
    else if (photo) await upload(takePhoto, photo);
    else if (map) await upload(takeMap, map);
    if (designs[0]) await openDesign(designs[0]);
  });

  return { choosePhoto: () => photoFile.click(), chooseMap: () => mapFile.click(), askView };
}
