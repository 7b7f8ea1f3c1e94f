// The figures beside the picture, each as the server told it.

import { drawPlot } from "./plot.js";
import { degText, holeText, html, lengthText, mmText, put, short } from "./words.js";

const by = (id) => document.getElementById(id);
const NEEDS = { 0.5: "clear", 0.2: "plain to see", 0.1: "just seen" };
const PLACES = { frame: "over the frame", middle: "in the middle", corner: "in the corner" };
const cycles = (value) => `${short(value)} cycles/mm`;
const share = (value) => Math.abs(value) < 0.005 ? "same" : `${Math.round(-100 * value)} %`;
const stops = (value) => Math.abs(value) < 0.05 ? "same" : `${value > 0 ? "+" : ""}${value.toFixed(1)}`;
const darker = (value) => value === "infinity" || value === null ? "no light" : Math.abs(value) < 0.05 ? "0 stops" : `${value.toFixed(1)} stops darker`;

export class Figures {
  constructor(bench, start) {
    this.bench = bench;
    this.contrasts = start.contrasts;
    this.place = "frame";
    this.best = by("best");
    put(this.best, html`<div class="needs">
      <div class="field"><label for="need">Detail that is</label><select id="need">${this.contrasts.map((c) => html`<option value="${c}">${NEEDS[c] ?? "detail"}, ${Math.round(100 * c)} %</option>`)}</select></div>
      <div class="field"><label for="need-place">Where</label><select id="need-place">${Object.entries(PLACES).map(([key, text]) => html`<option value="${key}">${text}</option>`)}</select></div></div>
      <div id="best-answer"></div>`);
    by("need").addEventListener("change", () => bench.change({ contrast: Number(by("need").value) }));
    by("need-place").addEventListener("change", () => { this.place = by("need-place").value; this.#best(); });
    this.best.addEventListener("click", (event) => {
      const hole = event.target.closest("[data-hole]")?.dataset.hole;
      if (hole) bench.change({ shape: "round", hole_mm: Number(hole) });
    });
  }

  quick(answer) {
    this.figures = { ...this.figures, ...answer.figures };
    this.exposure = answer.exposure;
    this.#key();
  }

  all(answer) {
    this.figures = answer.figures;
    this.exposure = answer.exposure;
    this.whole = true;
    this.#key();
    this.#best();
    this.#frame();
  }

  waiting(on) { by("figures").classList.toggle("waiting", on); }

  curves(answer) {
    drawPlot(by("plot"), answer, this.bench.state.contrast ?? 0.2);
    put(by("points"), html`<ul class="points">${answer.places.map((p) => html`<li><img src="${p.spot.png}" alt="A point of light as the film records it, ${p.name}" width="96" height="96"><span>${p.name}</span></li>`)}</ul>
      <p class="hint">Each ${mmText(answer.places[0].spot.side_mm)} of film wide${answer.object_distance_mm === "infinity" ? ", of a point far away" : `, of a point ${lengthText(answer.object_distance_mm)} away`}. Brightened, so that the faint rings are seen.</p>`);
  }

  picture(about) {
    this.about = about;
    this.#warnings();
  }

  #key() {
    const f = this.figures;
    const e = this.exposure;
    const near = f.distances?.[0];
    const rows = [
      ["f-number", `f/${short(f.f_number)}`, "f-number"],
      ["Sees", `${degText(f.horizontal_view_deg)} across, ${degText(f.vertical_view_deg)} high`, "view"],
      ["Corners", darker(f.corner_falloff_stops), "corner"],
      near && ["Finest detail", cycles(near.detail_cycles_mm), "detail"],
      near && ["Half of a point in", mmText(near.spot_mm), "spot"],
    ].filter(Boolean);
    const time = e ? html`<p class="time"><span class="time-name">Exposure in this light</span> <strong data-figure="time">${e.text}</strong>
      <span class="hint">${e.note}${e.corner_text && e.corner_text !== e.text ? `; for the corners ${e.corner_text}` : ""}</span></p>`
      : html`<p class="time"><span class="time-name">Exposure in this light</span> <span class="hint">Tell the light, then the time stands here.</span></p>`;
    put(by("key-figures"), html`${time}<dl>${rows.map(([name, text, key]) => html`<div><dt>${name}</dt><dd data-figure="${key}">${text}</dd></div>`)}</dl>`);
    this.#warnings();
  }

  #warnings() {
    // What the exposure's own note says stands beside the time already.
    const notes = (this.about?.notes ?? []).filter((note) => !this.exposure?.note?.includes(note));
    if (this.about && this.about.covered_share < 0.995 && !notes.some((n) => /cover|reach/i.test(n))) notes.unshift(`The photo covers ${Math.floor(100 * this.about.covered_share)} % of the frame; the rest is hatched.`);
    const list = by("warnings");
    const key = notes.join("|");
    if (key === this.shownNotes) return;
    this.shownNotes = key;
    put(list, html`${notes.map((note) => html`<li>${note}</li>`)}`);
  }

  #best() {
    const { advice } = this.figures;
    const contrast = this.bench.state.contrast ?? 0.2;
    by("need").value = String(contrast);
    if (!advice) return put(by("best-answer"), html``);
    const line = advice.best.find((b) => Math.abs(b.contrast - contrast) < 1e-9) ?? advice.best[0];
    const best = line[`${this.place}_mm`];
    this.bestHole = best;
    const taken = Number(best.toPrecision(3));
    const { tolerance } = advice;
    const made = [...(advice.own ? [{ ...advice.own, own: true }] : []), ...advice.choices, ...(advice.best_choice ? [advice.best_choice] : [])].sort((a, b) => a.diameter_mm - b.diameter_mm);
    put(by("best-answer"), html`
      <div class="best-line">${rings(this.figures.hole_mm, best)}<p><strong data-figure="best">${holeText(best)}</strong><br>${PLACES[this.place]}</p>
        <button data-hole="${taken}" aria-label="Take it, ${holeText(taken)}" ${this.bench.state.shape === "round" && this.bench.state.hole_mm === taken ? html`disabled` : ""}>Take it</button></div>
      ${tolerance ? html`<p class="hint">A hole from ${holeText(tolerance.low_mm)} to ${holeText(tolerance.high_mm)} loses at most ${Math.round(100 * tolerance.lost_share)} % of the detail plain to see.</p>` : ""}
      <div class="scroll" tabindex="0" role="region" aria-label="Drills and needles"><table><caption>Drills and needles near it, against the best over the frame</caption>
      <thead><tr><th scope="col">Tool</th><th scope="col">Hole, mm</th><th scope="col">Detail</th><th scope="col">Light, stops</th><th scope="col"><span class="sr">Take</span></th></tr></thead>
      <tbody>${made.map((c) => html`<tr class="${c.own ? "own" : ""}"><th scope="row">${c.label}</th><td>${c.diameter_mm.toFixed(c.diameter_mm < 1 ? 3 : 2)}${c.unsure_mm ? html` <span class="unsure">&plusmn; ${short(c.unsure_mm, 2)}</span>` : ""}</td>
        <td>${share(c.detail_loss_share)}</td><td>${stops(c.exposure_stops)}</td>
        <td>${c.own ? "" : html`<button class="small" data-hole="${Number(c.diameter_mm.toPrecision(4))}" aria-label="Take ${c.label}, ${holeText(c.diameter_mm)}">Take</button>`}</td></tr>`)}</tbody></table></div>
      ${advice.note ? html`<p class="hint">${advice.note}</p>` : ""}
      <p class="hint">${advice.caution}</p>`);
  }

  #frame() {
    const f = this.figures;
    put(by("all-figures"), html`
      <div class="scroll" tabindex="0" role="region" aria-label="Detail and light by place"><table><caption>Finest detail at 20 % contrast, cycles/mm</caption>
        <thead><tr><th scope="col">Place</th><th scope="col">Off axis</th><th scope="col">Light</th><th scope="col">Outwards</th><th scope="col">Around</th></tr></thead>
        <tbody>${f.places.map((p) => html`<tr><th scope="row">${p.name}</th><td>${degText(p.field_deg)}</td><td>${p.falloff_stops === "infinity" ? "none" : p.falloff_stops < 0.05 ? "full" : `-${p.falloff_stops.toFixed(1)} stops`}</td>
          <td>${short(p.tangential_cycles_mm)}</td><td>${short(p.sagittal_cycles_mm)}</td></tr>`)}</tbody></table></div>
      <div class="scroll" tabindex="0" role="region" aria-label="Detail by distance"><table><caption>In the middle, by distance of the object</caption>
        <thead><tr><th scope="col">Distance</th><th scope="col">Cycles/mm</th><th scope="col">One cycle there</th><th scope="col">Best hole</th></tr></thead>
        <tbody>${f.distances.map((d) => html`<tr><th scope="row">${lengthText(d.distance_mm)}</th><td>${short(d.detail_cycles_mm)}</td>
          <td>${d.object_mm === "infinity" ? "" : mmText(d.object_mm)}</td><td>${holeText(d.best_hole_mm)}</td></tr>`)}</tbody></table></div>
      <p class="hint">Hole ${holeText(f.hole_mm)}${f.plate_thickness_mm ? `, plate ${holeText(f.plate_thickness_mm)}` : ""}, hole to film ${mmText(f.focal_length_mm)},
        frame ${mmText(f.frame_width_mm)} x ${mmText(f.frame_height_mm)}, ${f.material}, judged at ${short(f.mean_wavelength_nm)} nm on average;
        contrast ends at ${cycles(f.cutoff_cycles_mm)}.</p>`);
  }
}

function rings(own, best) {
  // The hole there is, dark, and the best one as a dashed ring, in one scale.
  const scale = 30 / Math.max(own, best);
  return html`<svg class="rings" viewBox="-34 -34 68 68" role="img" aria-label="Your hole is ${own > best * 1.01 ? "larger than" : own < best * 0.99 ? "smaller than" : "as large as"} the best one">
    <circle class="own-hole" r="${own * scale}"/><circle class="best-hole" r="${best * scale}"/></svg>`;
}

export function showDifference(answer) {
  by("difference-card").hidden = !answer;
  if (!answer) return;
  put(by("difference"), html`<ul class="sentences">${answer.sentences.length ? answer.sentences.map((s) => html`<li>${s}</li>`) : html`<li>no difference in the figures</li>`}</ul>
    <table><caption class="sr">A and now in figures</caption><thead><tr><td></td><th scope="col">A</th><th scope="col">Now</th></tr></thead>
    <tbody>${answer.rows.map((r) => html`<tr><th scope="row">${r.name}</th><td>${r.other}</td><td>${r.now}</td></tr>`)}</tbody></table>`);
}
