// Contrast against detail as curves, with the same as words and as a table.

import { html, put, short } from "./words.js";

const W = 400, H = 240, LEFT = 44, RIGHT = 12, TOP = 12, BOTTOM = 40;

export function drawPlot(host, answer, contrast) {
  const most = niceMost(answer.f_max_cycles_mm);
  const x = (f) => LEFT + (W - LEFT - RIGHT) * f / most.top;
  const y = (c) => TOP + (H - TOP - BOTTOM) * (1 - c);
  const line = (points) => points.filter(([f]) => f <= most.top).map(([f, c]) => `${x(f).toFixed(1)},${y(Math.abs(c)).toFixed(1)}`).join(" "); // below zero black and white are swapped
  const marks = [];
  for (let f = 0; f <= most.top + 1e-9; f += most.step) marks.push(f);
  const places = answer.places.map((place) => ({ ...place, kind: ["centre", "edge", "corner"].find((kind) => place.name.includes(kind)) ?? "edge" }));
  const words = places.map((place) => `${place.name}: ${sentence(place, contrast)}`).join("; ");
  put(host, html`
    <svg class="plot" viewBox="0 0 ${W} ${H}" role="img" aria-label="Contrast against detail. ${words}.">
      ${[0, 0.25, 0.5, 0.75, 1].map((c) => html`<line class="grid" x1="${LEFT}" x2="${W - RIGHT}" y1="${y(c)}" y2="${y(c)}"/>
        <text class="tick" x="${LEFT - 6}" y="${y(c) + 4}" text-anchor="end">${100 * c} %</text>`)}
      ${marks.map((f) => html`<line class="grid" x1="${x(f)}" x2="${x(f)}" y1="${TOP}" y2="${H - BOTTOM}"/>
        <text class="tick" x="${x(f)}" y="${H - BOTTOM + 16}" text-anchor="middle">${short(f)}</text>`)}
      <line class="need" x1="${LEFT}" x2="${W - RIGHT}" y1="${y(contrast)}" y2="${y(contrast)}"/>
      ${places.map((p) => html`<polyline class="curve out ${p.kind}" points="${line(p.curves.outwards)}"/><polyline class="curve ${p.kind}" points="${line(p.curves.around)}"/>`)}
      <text class="tick" x="${(LEFT + W - RIGHT) / 2}" y="${H - 4}" text-anchor="middle">detail on the film, cycles/mm</text>
    </svg>
    ${answer.unlit?.length ? html`<p class="hint">No light reaches: ${answer.unlit.join(", ")}.</p>` : ""}
    <ul class="legend">${places.map((p) => html`<li><svg class="key" viewBox="0 0 28 8" aria-hidden="true"><line class="curve ${p.kind}" x1="0" x2="28" y1="4" y2="4"/></svg>${p.name}</li>`)}
      <li><svg class="key" viewBox="0 0 28 8" aria-hidden="true"><line class="curve out" x1="0" x2="28" y1="4" y2="4"/></svg>dashed: outwards, else around</li></ul>
    <details><summary>The curves as a table</summary>
      <table><caption class="sr">Contrast by detail</caption>
        <thead><tr><th scope="col">cycles/mm</th>${places.map((p) => html`<th scope="col">${p.name}, around</th><th scope="col">outwards</th>`)}</tr></thead>
        <tbody>${rows(places, most.top)}</tbody></table></details>`);
}

function sentence(place, contrast) {
  const { outwards, around } = place.detail_cycles_mm;
  return `${Math.round(100 * contrast)} % until ${short(outwards)} cycles/mm outwards and ${short(around)} around`;
}

function rows(places, top) {
  const first = places[0].curves.around;
  const inside = first.filter(([f]) => f <= top).length;
  const every = Math.max(1, Math.floor(inside / 10));
  return first.map(([f], i) => ({ f, i })).filter(({ i }) => i % every === 0 && i < inside).map(({ f, i }) => html`<tr><th scope="row">${short(f, 2)}</th>
    ${places.map((p) => html`<td>${percent(p.curves.around[i])}</td><td>${percent(p.curves.outwards[i])}</td>`)}</tr>`);
}

const percent = (pair) => pair ? `${Math.round(100 * pair[1])} %` : "";

function niceMost(value) {
  const step = [0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 50, 100, 200].find((s) => value / s <= 6) ?? 500;
  return { step, top: Math.ceil(value / step - 1e-9) * step };
}
