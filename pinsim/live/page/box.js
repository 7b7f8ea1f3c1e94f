// The box drawn to scale, cut open: hole, depth, film and the rays that just reach its ends. Film, depth and hole can be dragged.
// Drawing only: where things lie, from the design's own lengths. Angles written on it come from the server.

import { degText, holeText, mmText } from "./words.js";

const NS = "http://www.w3.org/2000/svg";
const MARGIN = 24;
const TOP = 28; // the heading is above the rays

function node(name, attributes, parent, text) {
  const element = document.createElementNS(NS, name);
  for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
  if (text !== undefined) element.textContent = text;
  if (parent) parent.append(element);
  return element;
}

export class BoxDrawing {
  constructor(bench, start, host) {
    this.bench = bench;
    this.frames = start.frames;
    this.host = host;
    this.above = false;
    this.svg = node("svg", { class: "box-svg", role: "group", "aria-label": "The box cut open, to scale" });
    // What is drawn anew each time, and the handles, which stay so that the keyboard's focus stays on them.
    this.art = node("g", { "aria-hidden": "true" }, this.svg);
    this.handles = new Map();
    host.append(this.svg);
    this.held = null;
    this.svg.addEventListener("pointerdown", (event) => this.#grab(event));
    this.svg.addEventListener("pointermove", (event) => this.#drag(event));
    for (const name of ["pointerup", "pointercancel"]) this.svg.addEventListener(name, () => this.#drop());
    this.svg.addEventListener("keydown", (event) => this.#key(event));
    new ResizeObserver(() => this.draw()).observe(host);
  }

  size(state) {
    const frame = this.frames.find((f) => f.name === state.frame);
    const [width, height] = frame ? [frame.width_mm, frame.height_mm] : [state.width_mm, state.height_mm];
    return frame && state.portrait ? [height, width] : [width, height];
  }

  show(figures) {
    this.figures = figures;
    this.draw();
  }

  draw() {
    const { state } = this.bench;
    const width = Math.max(300, this.host.clientWidth);
    const height = width > 900 ? 270 : 208;
    this.height = height;
    const [filmWidth, filmHeight] = this.size(state);
    if (!state.depth_mm || !filmWidth) return;
    const extent = this.above ? filmWidth : filmHeight;
    const offset = this.above ? state.shift_mm : state.rise_mm;
    const bent = state.bend_mm !== null && (this.above ? state.bend_axis === "vertical" : state.bend_axis === "horizontal");
    const reach = extent / 2 + Math.abs(offset);
    if (!this.held) {
      // While something is held the scale stays, so that it stays under the pointer.
      this.scale = Math.min((height - 2 * MARGIN) / (2 * reach), (width * 0.4) / state.depth_mm);
      this.holeScale = [400, 200, 100, 50, 20, 10, 5, 2].find((s) => s * state.hole_mm <= 64) || 1;
    }
    const s = this.scale;
    const axis = height / 2;
    const holeX = Math.min(width * 0.38, width - 40 - state.depth_mm * s);
    const filmX = holeX + state.depth_mm * s;
    Object.assign(this, { axis, holeX });
    const at = (u) => {
      // The film lies upside down in the box: what is up in the scene is down here. From above, right in the scene is drawn up.
      const arc = u;
      const z = bent ? state.depth_mm - state.bend_mm + state.bend_mm * Math.cos(arc / state.bend_mm) : state.depth_mm;
      const v = bent ? state.bend_mm * Math.sin(arc / state.bend_mm) : arc;
      return [holeX + z * s, axis + v * s];
    };
    const ends = [at(offset - extent / 2), at(offset + extent / 2)];
    this.svg.setAttribute("viewBox", `0 0 ${width} ${height}`);
    this.svg.setAttribute("width", width);
    this.svg.setAttribute("height", height);
    this.art.replaceChildren();
    const half = Math.max(reach * s + 10, 30);
    // Rays, out to the left edge
    const outside = ends.map(([x, y]) => {
      const slope = (y - axis) / (x - holeX || 1e-6);
      const far = Math.abs(slope) * holeX > axis - TOP ? (axis - TOP) / Math.abs(slope) : holeX;
      return [holeX - far, axis - slope * far];
    });
    // The field fades away outside: it does not end where the drawing does.
    const fade = node("linearGradient", { id: "fade", gradientUnits: "userSpaceOnUse", x1: Math.min(outside[0][0], outside[1][0]), x2: holeX, y1: 0, y2: 0 }, this.art);
    node("stop", { class: "fade-out", offset: 0 }, fade);
    node("stop", { class: "fade-in", offset: 1 }, fade);
    node("polygon", { fill: "url(#fade)", points: [[holeX, axis], ...outside].map((p) => p.join()).join(" ") }, this.art);
    const filmPoints = Array.from({ length: 33 }, (_, i) => at(offset - extent / 2 + (extent * i) / 32));
    node("polygon", { class: "cone inner", points: [[holeX, axis], ...filmPoints].map((p) => p.join()).join(" ") }, this.art);
    node("line", { class: "axis", x1: 0, y1: axis, x2: width, y2: axis }, this.art);
    for (const [i, end] of ends.entries()) {
      node("polyline", { class: "ray", points: [outside[i], [holeX, axis], end].map((p) => p.join()).join(" ") }, this.art);
    }
    // The box
    const back = Math.max(...filmPoints.map(([x]) => x)) + 7;
    node("path", { class: "wall", d: `M${holeX} ${axis - 3}V${axis - half}H${back}V${axis + half}H${holeX}V${axis + 3}` }, this.art);
    node("polyline", { class: "film", points: filmPoints.map((p) => p.join()).join(" ") }, this.art);
    // Lengths
    const below = Math.min(height - 8, axis + half + 15);
    node("path", { class: "measure", d: `M${holeX} ${below - 9}v6M${filmX} ${below - 9}v6M${holeX} ${below - 6}H${filmX}` }, this.art);
    node("text", { class: "label", x: (holeX + filmX) / 2, y: below + 6, "text-anchor": "middle" }, this.art, mmText(state.depth_mm));
    node("text", { class: "label", x: Math.min(back + 6, width - 4), y: axis - half + 4, "text-anchor": back > width - 76 ? "end" : "start", dy: back > width - 76 ? -8 : 8 }, this.art, mmText(extent));
    const angle = this.figures?.[this.above ? "horizontal_view_deg" : "vertical_view_deg"];
    if (angle) node("text", { class: "label strong", x: Math.max(holeX * 0.62, 92), y: axis - 6, "text-anchor": "middle" }, this.art, degText(angle));
    this.#plate(state);
    // Handles
    const middle = at(offset);
    this.#handle("depth", middle[0], middle[1], "Hole to film, drag", state.depth_mm, mmText(state.depth_mm), "horizontal");
    this.#handle(this.above ? "shift" : "rise", ends[1][0], ends[1][1], this.above ? "Shift, drag" : "Rise, drag", offset, mmText(offset), "vertical");
    for (const [part, handle] of this.handles) {
      handle.style.display = part === (this.above ? "rise" : "shift") || (part === "hole" && state.shape === "traced") ? "none" : "";
    }
  }

  #plate(state) {
    // The plate under a strong magnifier: thickness and hole, in one scale.
    const m = this.holeScale;
    const x = 44, y = this.height - 46, r = 40;
    const hole = Math.min(this.above || state.shape === "round" || !state.hole_h_mm ? state.hole_mm : state.hole_h_mm, (2 * r) / m);
    const thick = Math.max(1.6, Math.min(state.plate_mm * m, 1.5 * r));
    const lens = node("g", { class: "lens" }, this.art);
    node("line", { class: "leader", x1: x + r * 0.9, y1: y - r * 0.5, x2: this.holeX - 3, y2: this.axis + 3 }, lens);
    node("circle", { class: "lens-back", cx: x, cy: y, r }, lens);
    const gap = (hole * m) / 2;
    const end = (h) => Math.sqrt(Math.max(r * r - (thick / 2) ** 2, 0)) - h;
    if (end(gap) > 0) {
      for (const sign of [-1, 1]) node("rect", { class: "plate", x: x - thick / 2, y: sign < 0 ? y - gap - end(gap) : y + gap, width: thick, height: end(gap) }, lens);
    }
    node("circle", { class: "lens-edge", cx: x, cy: y, r }, lens);
    if (this.holeX > 210) node("text", { class: "label", x: x + r + 6, y: y + r - 1 }, lens, `hole ${holeText(hole)}`);
    if (state.shape !== "traced") this.#handle("hole", x, y + gap, "Hole, drag", state.hole_mm, holeText(state.hole_mm), "vertical");
  }

  #handle(part, x, y, label, value, text, orientation) {
    let handle = this.handles.get(part);
    if (!handle) {
      const [low, high] = LIMITS[part];
      handle = node("g", { class: `handle ${orientation}`, "data-part": part, role: "slider", tabindex: 0, "aria-label": label,
        "aria-orientation": orientation, "aria-valuemin": low, "aria-valuemax": high }, this.svg);
      node("circle", { class: "hit", r: 22 }, handle);
      node("circle", { class: "knob", r: 7 }, handle);
      node("path", { class: "arrows", d: orientation === "horizontal" ? "M-15 0l5-4v8zM15 0l-5-4v8z" : "M0-15l-4 5h8zM0 15l-4-5h8z" }, handle);
      this.handles.set(part, handle);
    }
    handle.setAttribute("transform", `translate(${x} ${y})`);
    handle.setAttribute("aria-valuenow", value);
    handle.setAttribute("aria-valuetext", text);
  }

  #grab(event) {
    const part = event.target.closest?.("[data-part]")?.dataset.part;
    if (!part) return;
    event.preventDefault();
    this.svg.setPointerCapture(event.pointerId);
    this.held = { part, x: event.clientX, y: event.clientY, state: this.bench.state };
    this.svg.querySelector(`[data-part="${part}"]`)?.focus({ preventScroll: true });
  }

  #drag(event) {
    if (!this.held) return;
    const { part, state } = this.held;
    const zoom = this.svg.viewBox.baseVal.width / this.svg.getBoundingClientRect().width;
    const dx = (event.clientX - this.held.x) * zoom;
    const dy = (event.clientY - this.held.y) * zoom;
    this.#set(part, { depth: state.depth_mm + dx / this.scale, rise: state.rise_mm + dy / this.scale, shift: state.shift_mm + dy / this.scale,
      hole: state.hole_mm + (2 * dy) / this.holeScale }[part], true);
  }

  #drop() {
    if (!this.held) return;
    this.held = null;
    this.bench.settle("drag");
    this.draw();
  }

  #key(event) {
    const part = event.target.closest?.("[data-part]")?.dataset.part;
    const ways = { ArrowRight: 1, ArrowUp: 1, ArrowLeft: -1, ArrowDown: -1, PageUp: 10, PageDown: -10 };
    if (!part || !(event.key in ways)) return;
    event.preventDefault();
    const { state } = this.bench;
    const way = ways[event.key] * (event.shiftKey ? 10 : 1);
    const value = { depth: state.depth_mm + way, rise: state.rise_mm + way, shift: state.shift_mm + way, hole: state.hole_mm + 0.01 * way }[part];
    this.#set(part, value, false);
  }

  #set(part, value, moving) {
    const [low, high] = LIMITS[part];
    const fine = part === "hole" ? 0.002 : part === "depth" ? 0.5 : 0.5;
    const tidy = Number((Math.round(Math.min(high, Math.max(low, value)) / fine) * fine).toFixed(4));
    const { state } = this.bench;
    const patch = { [`${part}_mm`]: tidy };
    if (part === "hole" && state.hole_h_mm && (state.shape === "oval" || state.shape === "slit")) {
      patch.hole_h_mm = Number((state.hole_h_mm * tidy / state.hole_mm).toFixed(4)); // keeps its form
    }
    this.bench.change(patch, { moving: true, by: this });
    if (!moving) this.bench.settle(part);
    this.draw();
  }
}

// How far the hand can drag; any allowed length can be typed.
const LIMITS = { depth: [5, 2000], rise: [-200, 200], shift: [-200, 200], hole: [0.02, 10] };
