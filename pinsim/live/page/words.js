// Plain numbers to words people read. Only how a figure is written is decided here, never the figure.

const trim = (text) => text.includes(".") && !text.includes("e") ? text.replace(/0+$/, "").replace(/\.$/, "") : text;

export function digits(value, count = 3) {
  if (value === 0) return "0";
  const text = Number(value).toPrecision(count);
  return text.includes("e") ? String(Number(text)) : text;
}

export const short = (value, count = 3) => trim(digits(value, count));

export function lengthText(mm) {
  if (mm === "infinity" || mm === Infinity) return "infinity";
  const size = Math.abs(mm);
  if (size >= 1000) return `${short(mm / 1000)} m`;
  if (size >= 200) return `${short(mm / 10)} cm`;
  return mmText(mm);
}

export const mmText = (mm) => `${short(mm, Math.abs(mm) >= 100 ? 4 : 3)} mm`;
export const holeText = (mm) => `${mm === 0 ? "0" : mm < 1 ? Number(mm).toFixed(3).replace(/0$/, "") : short(mm)} mm`;
export const degText = (deg) => `${short(deg, Math.abs(deg) >= 100 ? 3 : 2)} deg`;

export function timeText(s) {
  if (s < 1) return s >= 0.3 ? `${short(s, 2)} s` : `1/${short(1 / s, 2)} s`;
  if (s < 60) return `${short(s, 2)} s`;
  if (s < 3600) return part(s, 60, "min", "s");
  return part(s / 60, 60, "h", "min");
}

function part(value, many, large, small) {
  let whole = Math.floor(value / many);
  let rest = Math.round(value - whole * many);
  if (rest === many) { whole += 1; rest = 0; }
  return rest ? `${whole} ${large} ${rest} ${small}` : `${whole} ${large}`;
}

export const stopsText = (stops) => Math.abs(stops) < 0.05 ? "as bright as the middle" : `${Math.abs(stops).toFixed(1)} stops ${stops > 0 ? "darker" : "brighter"}`;
export const distanceText = (mm) => mm === "infinity" ? "far away" : lengthText(mm);

export const html = (strings, ...values) => {
  // A template of markup; every value is text unless it is itself made by html.
  const parts = strings.map((text, i) => text + (i < values.length ? piece(values[i]) : ""));
  return new Markup(parts.join(""));
};
class Markup { constructor(text) { this.text = text; } toString() { return this.text; } }
const ESCAPES = { "&": "&amp;", "<": "&lt;", ">": "&gt;", '"': "&quot;", "'": "&#39;" };
const piece = (value) => {
  if (value instanceof Markup) return value.text;
  if (Array.isArray(value)) return value.map(piece).join("");
  return value === null || value === undefined || value === false ? "" : String(value).replace(/[&<>"']/g, (c) => ESCAPES[c]);
};
export const put = (element, markup) => { element.innerHTML = piece(markup); };
