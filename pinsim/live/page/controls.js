// What a builder makes, group by group: the scene in front, the hole, the box, the film, the light.

import { Choice, Quantity, Segments, Switch, Words, make } from "./fields.js";
import { degText, holeText, lengthText, short, timeText } from "./words.js";

const round = (s) => s.shape === "round";
const sized = (s) => s.shape === "oval" || s.shape === "slit";
export const isPanorama = (state, context) => (state.projection || context.scene?.projection) === "equirectangular";
const step = (size) => (value) => Math.round(value / size) * size;
const tidy = (size) => (value) => Number(step(size)(value).toFixed(4));

export function buildControls(bench, start, ask) {
  const fields = [];
  const into = (id, ...list) => {
    document.getElementById(id).append(...list.map((field) => field.element));
    fields.push(...list);
  };

  // The scene
  const photo = make("button", { type: "button", id: "choose-photo", textContent: "Photo of mine" });
  const map = make("button", { type: "button", id: "choose-map", textContent: "Distance map" });
  photo.addEventListener("click", () => ask.photo());
  map.addEventListener("click", () => ask.map());
  into("scene-group", new Choice(bench, {
    key: "scene", label: "In front of the box", options: (c) => c.scenes.map((scene) => [scene.id, scene.name]),
    set: (id) => ({ scene: id, view_deg: null, projection: null, distance_mm: null, map: null, ground: null, horizon: null,
      yaw_deg: null, pitch_deg: null, roll_deg: null, light: null, ...ask.lightOf(id) }),
  }));
  document.getElementById("scene-group").append(make("div", { className: "row halves" }, photo, map));
  into("scene-group",
    new Choice(bench, {
      key: "distance", label: "How far everything is",
      options: (c) => [
        ["own", c.scene?.distance === "map" ? "as its distance map tells" : "as the scene tells"],
        ["one", "one distance"],
        ...c.maps.map((m) => [m.id, `map ${m.name}`]),
      ],
      get: (s) => s.map || (s.distance_mm !== null ? "one" : "own"),
      set: (value) => value === "own" ? { map: null, distance_mm: null } : value === "one" ? { map: null, distance_mm: 4000 } : { map: value, distance_mm: null },
    }),
    new Quantity(bench, { key: "distance_mm", label: "Distance", kind: "distance", low: 100, high: 100000, scale: "log", endless: true,
      text: lengthText, when: (s) => s.distance_mm !== null }),
    new Words(bench, { key: "map_step", label: "One value of the map means", placeholder: "5cm", empty: null, when: (s) => s.map !== null }),
    new Quantity(bench, { key: "view_deg", label: "Photo's angle of view", kind: "angle", low: 10, high: 170, text: degText,
      value: (s, c) => c.scene?.view_deg ?? null, rounding: tidy(0.5), when: (s, c) => !isPanorama(s, c) && c.scene?.kind !== "sample" }),
    new Quantity(bench, { key: "yaw_deg", label: "Look to the right", kind: "angle", low: -180, high: 180, text: degText, value: () => 0,
      rounding: tidy(0.5), when: isPanorama }),
    new Quantity(bench, { key: "pitch_deg", label: "Look up", kind: "angle", low: -90, high: 90, text: degText, value: () => 0,
      rounding: tidy(0.5), when: isPanorama }),
    new Quantity(bench, { key: "roll_deg", label: "Turned clockwise", kind: "angle", low: -180, high: 180, text: degText, value: () => 0,
      rounding: tidy(0.5), when: isPanorama }),
  );

  // The hole
  into("hole-group",
    new Segments(bench, { key: "shape", label: "Shape",
      options: [["round", "Round"], ["oval", "Oval"], ["slit", "Slit"], ...(start.designs.some((d) => d.traced) ? [["traced", "Traced"]] : [])],
      set: (shape, s) => ({ shape,
        ...(shape === "oval" || shape === "slit" ? { hole_h_mm: s.hole_h_mm ?? s.hole_mm } : {}),
        ...(shape === "traced" ? { traced: s.traced ?? start.designs.find((d) => d.traced).id } : {}) }) }),
    new Quantity(bench, { key: "hole_mm", label: "Diameter", kind: "length", low: 0.05, high: 3, scale: "log", text: holeText, when: round }),
    new Quantity(bench, { key: "hole_mm", label: "Width", kind: "length", low: 0.05, high: 3, scale: "log", text: holeText, when: sized }),
    new Quantity(bench, { key: "hole_h_mm", label: "Height", kind: "length", low: 0.05, high: 3, scale: "log", text: holeText, when: sized }),
    new Quantity(bench, { key: "plate_mm", label: "Plate thickness", kind: "length", low: 0, high: 2, scale: "square", text: holeText, rounding: tidy(0.005) }),
  );

  // The box
  into("box-group",
    new Words(bench, { key: "name", label: "Name of the design" }),
    new Quantity(bench, { key: "depth_mm", label: "Hole to film", kind: "length", low: 10, high: 1000, scale: "log", text: lengthMm }),
    new Quantity(bench, { key: "rise_mm", label: "Rise: sees more above", kind: "length", low: -60, high: 60, text: lengthMm, rounding: tidy(0.5) }),
    new Quantity(bench, { key: "shift_mm", label: "Shift: more to the right", kind: "length", low: -60, high: 60, text: lengthMm, rounding: tidy(0.5) }),
  );

  // The film
  const frameText = (f) => `${f.name}, ${short(f.width_mm, 4)} x ${short(f.height_mm, 4)} mm`;
  into("film-group",
    new Choice(bench, { key: "frame", label: "Frame",
      options: () => [...start.frames.map((f) => [f.name, frameText(f)]), ["", "own size"]],
      get: (s) => s.frame ?? "",
      set: (name, s) => {
        const old = start.frames.find((f) => f.name === s.frame);
        const size = old ? (s.portrait ? { width_mm: old.height_mm, height_mm: old.width_mm } : { width_mm: old.width_mm, height_mm: old.height_mm }) : {};
        return name ? { frame: name, width_mm: null, height_mm: null } : { frame: null, portrait: false, ...size };
      } }),
    new Quantity(bench, { key: "width_mm", label: "Film width", kind: "length", low: 5, high: 500, scale: "log", text: lengthMm, when: (s) => s.frame === null }),
    new Quantity(bench, { key: "height_mm", label: "Film height", kind: "length", low: 5, high: 500, scale: "log", text: lengthMm, when: (s) => s.frame === null }),
    new Switch(bench, { key: "portrait", label: "Held upright", when: (s) => s.frame !== null }),
    new Segments(bench, { key: "bend_mm", label: "Surface", options: [["flat", "Flat"], ["vertical", "Bent across"], ["horizontal", "Bent upright"]],
      get: (s) => s.bend_mm === null ? "flat" : s.bend_axis,
      set: (value, s) => value === "flat" ? { bend_mm: null } : { bend_axis: value, bend_mm: s.bend_mm ?? s.depth_mm } }),
    new Quantity(bench, { key: "bend_mm", label: "Bend radius", kind: "length", low: 10, high: 1000, scale: "log", text: lengthMm, when: (s) => s.bend_mm !== null }),
    new Choice(bench, { key: "material", label: "Material", options: () => start.materials.map((m) => [m.name, m.name]) }),
  );
  const about = make("p", { className: "hint" });
  document.getElementById("film-group").append(about);

  // The light
  const words = new Choice(bench, { key: "light", label: "Light on the scene",
    options: (c, s) => [
      ["", c.scene?.ev !== null && c.scene?.ev !== undefined ? `as the scene tells, EV ${short(c.scene.ev, 3)}` : "not told"],
      ...start.lights.filter((light, i, all) => all.findIndex((one) => one.words === light.words) === i).map((light) => [light.name, `${light.words}, EV ${light.ev_text}`]),
      ...(s.light !== null && !start.lights.some((l) => l.name === s.light || l.ev === s.light) ? [["typed", "as typed below"]] : []),
    ],
    get: (s) => s.light === null ? "" : (start.lights.find((l) => l.name === s.light || l.ev === s.light)?.name ?? "typed"),
    set: (name) => name === "typed" ? null : { light: name || null } });
  into("light-group",
    words,
    new Quantity(bench, { key: "light", label: "Brightness, EV at ISO 100", kind: "light", low: -6, high: 17, rounding: tidy(0.1),
      text: (v) => typeof v === "number" ? `EV ${short(v, 3)}` : String(v), value: (s, c) => c.scene?.ev ?? null,
      hint: "Also a meter's reading: f/16 1/125 ISO 100, 12000 lx, 400 cd/m2" }),
    new Segments(bench, { key: "time", label: "Exposure",
      options: [["none", "Photo's tones"], ["auto", "Right time"], ["own", "My time"]],
      get: (s) => s.time === null || s.time === "none" ? "none" : s.time === "auto" ? "auto" : "own",
      set: (value, s, c) => ({ time: value === "own" ? c.rightTime ?? 1 : value === "none" ? null : value, ...(value === "none" ? { grain_seed: null } : {}) }) }),
    new Quantity(bench, { key: "time", label: "Time", kind: "time", low: 0.01, high: 36000, scale: "log", text: timeText,
      when: (s) => s.time !== null && s.time !== "none" && s.time !== "auto" }),
    new Switch(bench, { key: "grain_seed", label: "Grain, at true size", get: (s) => s.grain_seed !== null, set: (on) => ({ grain_seed: on ? 1 : null }),
      when: (s) => s.time !== null && s.time !== "none" }),
    new Segments(bench, { key: "wavelength_nm", label: "Colours of the light", options: [["all", "All"], ["one", "One only"]],
      get: (s) => s.wavelength_nm === null ? "all" : "one", set: (value) => ({ wavelength_nm: value === "all" ? null : 550 }) }),
    new Quantity(bench, { key: "wavelength_nm", label: "Wavelength", kind: "wavelength", low: 380, high: 720, text: (nm) => `${short(nm, 4)} nm`, rounding: step(1),
      when: (s) => s.wavelength_nm !== null }),
  );

  // Below the picture
  fields.push(
    new Segments(bench, { key: "look", label: "Seen", into: document.querySelector('[data-field="look"]'),
      options: [["upright", "Upright"], ["screen", "From behind"], ["emulsion", "Emulsion"]] }),
    new Segments(bench, { key: "tone", label: "Tones", into: document.querySelector('[data-field="tone"]'),
      options: [["positive", "Positive"], ["negative", "Negative"]] }),
  );

  return {
    show(state, context) {
      for (const field of fields) field.show(state, context);
      const material = start.materials.find((m) => m.name === state.material);
      about.textContent = material ? `${material.description}; index ${short(material.speed_iso)}, long exposures ${material.reciprocity === "none" ? "uncorrected" : material.reciprocity}` : "";
    },
    refuse(errors) {
      // Shows each message beside its field; returns whether all had one.
      let all = true;
      for (const [key, text] of Object.entries(errors)) {
        const field = fields.findLast((f) => f.key === key && !f.element.hidden && f.element.isConnected);
        if (field) field.refuse(text);
        else all = false;
      }
      return all;
    },
    accept(state, context) {
      for (const field of fields) {
        if (field.message.hidden) continue;
        field.refuse("");
        field.show(state, context);
      }
    },
  };
}

const lengthMm = (mm) => `${short(mm, Math.abs(mm) >= 100 ? 4 : 3)} mm`;
