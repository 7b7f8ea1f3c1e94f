// Designs in and out, pictures and sheets out: the same files as the command line writes.

import * as api from "./api.js";

const by = (id) => document.getElementById(id);

export function setUpKeeping({ bench, start, showError, say }) {
  const dialog = by("save-dialog");
  const done = (text) => { by("save-done").textContent = text; };
  const refuse = (text) => {
    by("save-error").textContent = text;
    by("save-error").hidden = !text;
  };
  const guarded = (button, work) => by(button).addEventListener("click", async () => {
    by(button).setAttribute("aria-busy", "true");
    refuse("");
    done("Being made ...");
    try {
      done(`${await work()} is saved.`);
    } catch (error) {
      done("");
      refuse(error.message);
    }
    by(button).removeAttribute("aria-busy");
  });

  async function open(file) {
    try {
      const answer = await api.openDesign(await file.text(), file.name);
      bench.change(answer.state);
      say(`${file.name} is opened. ${(answer.notes ?? []).join(" ")}`);
    } catch (error) {
      showError(`${file.name}: ${error.message}`);
    }
  }

  const samples = by("sample-camera");
  for (const design of start.designs) samples.append(new Option(design.name, design.id));
  samples.addEventListener("change", () => {
    const design = start.designs.find((d) => d.id === samples.value);
    if (design) bench.change(cameraOnly(design.state));
    samples.value = "";
  });

  by("open-design").addEventListener("click", () => by("design-file").click());
  by("design-file").addEventListener("change", async () => {
    if (by("design-file").files[0]) await open(by("design-file").files[0]);
    by("design-file").value = "";
  });
  by("save-open").addEventListener("click", () => {
    const hole = bench.state.hole_mm ?? 0.3;
    if (!by("sheet-holes").value) by("sheet-holes").value = [0.7, 1, 1.4, 2].map((k) => `${Number((hole * k).toPrecision(2))} mm`).join(", ");
    refuse("");
    done("");
    dialog.showModal();
  });
  by("save-close").addEventListener("click", () => dialog.close());
  guarded("save-design", async () => {
    const { toml, file_name: name } = await api.design(bench.state);
    api.hand(new Blob([toml], { type: "application/toml" }), name);
    return name;
  });
  guarded("save-picture", async () => (await api.save({ state: bench.state, kind: "picture", format: by("save-format").value })).file_name);
  guarded("save-comparison", async () => (await api.save({ state: bench.state, other: { ...bench.pinned, look: bench.state.look },
    kind: "comparison", format: by("save-format").value })).file_name);
  guarded("save-sheet", async () => {
    const holes = [];
    for (const text of by("sheet-holes").value.split(",").map((one) => one.trim()).filter(Boolean)) {
      holes.push((await api.parse("length", text, "hole_mm")).value);
    }
    return (await api.save({ state: bench.state, kind: "contact", format: by("sheet-format").value, holes_mm: holes })).file_name;
  });

  return { open };
}

const CAMERA_KEYS = ["name", "shape", "hole_mm", "hole_h_mm", "traced", "plate_mm", "depth_mm", "frame", "width_mm", "height_mm", "portrait",
  "shift_mm", "rise_mm", "bend_mm", "bend_axis", "material", "materials_of", "tone"];
const cameraOnly = (state) => Object.fromEntries(CAMERA_KEYS.filter((key) => key in state).map((key) => [key, state[key]]));
