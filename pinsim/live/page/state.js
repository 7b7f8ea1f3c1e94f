// The state of the bench: what is drawn now, what is pinned as A, undo and redo, and the address that holds it all.

const NUMBERS = new Set(["view_deg", "yaw_deg", "pitch_deg", "roll_deg", "hole_mm", "hole_h_mm", "plate_mm", "depth_mm",
  "width_mm", "height_mm", "shift_mm", "rise_mm", "bend_mm", "wavelength_nm", "grain_seed", "contrast", "highlight_lift"]);
const EITHER = new Set(["distance_mm", "light", "time"]); // a number, or words
const MOST_STEPS = 200;

export const same = (a, b) => JSON.stringify(a) === JSON.stringify(b);

function written(value) {
  return value === null ? "" : String(value);
}

function read(key, text) {
  if (text === "") return key === "name" ? "" : null;
  if (NUMBERS.has(key) || (EITHER.has(key) && !Number.isNaN(Number(text)))) {
    const value = Number(text);
    return Number.isNaN(value) ? text : value; // the server says what is wrong with it
  }
  if (key === "portrait") return text === "true";
  return text;
}

export function toAddress(state, pinned, defaults) {
  // Everything that is told; nothing (null) is left out unless something would stand there by default.
  const pairs = new URLSearchParams();
  for (const [key, value] of Object.entries(state)) if (value !== null || (defaults[key] ?? null) !== null) pairs.set(key, written(value));
  if (pinned) {
    pairs.set("a", "1");
    for (const [key, value] of Object.entries(pinned)) {
      if (!same(value, state[key])) pairs.set(`a.${key}`, written(value));
    }
  }
  return `#${pairs}`;
}

export function fromAddress(hash, defaults) {
  // Returns {state, pinned}, or null when the address holds none. Keys nobody knows are left out: addresses get old.
  const pairs = new URLSearchParams(hash.replace(/^#/, ""));
  if (![...pairs.keys()].some((key) => key in defaults)) return null;
  const state = { ...defaults };
  for (const key of Object.keys(state)) if (pairs.has(key)) state[key] = read(key, pairs.get(key));
  let pinned = null;
  if (pairs.has("a")) {
    pinned = { ...state };
    for (const key of Object.keys(state)) if (pairs.has(`a.${key}`)) pinned[key] = read(key, pairs.get(`a.${key}`));
  }
  return { state, pinned };
}

export class Bench extends EventTarget {
  // Dispatches "change" with detail {keys, by}: which keys of the state changed, and who did it.
  constructor(state, pinned) {
    super();
    this.state = state;
    this.pinned = pinned;
    this.past = [];
    this.future = [];
    this.kept = { state, pinned }; // what undo returns to while a drag goes on
    this.lastKey = null;
    this.lastTime = 0;
  }

  change(patch, { moving = false, by = null } = {}) {
    const keys = Object.keys(patch).filter((key) => !same(this.state[key], patch[key]));
    if (keys.length) {
      this.state = { ...this.state, ...patch };
      this.#tell(keys, by);
    }
    if (!moving) this.settle();
  }

  pin(pinned) {
    this.pinned = pinned;
    this.settle();
    this.#tell(["pinned"], "pin");
  }

  replace(state, pinned, by) {
    const keys = Object.keys({ ...this.state, ...state }).filter((key) => !same(this.state[key], state[key]));
    if (!same(pinned, this.pinned)) keys.push("pinned");
    this.state = state;
    this.pinned = pinned;
    this.#tell(keys, by);
  }

  settle(name = null) {
    // One step of undo; quick steps of a slider, which tells its name, count as one.
    if (same(this.kept, { state: this.state, pinned: this.pinned })) return;
    const now = performance.now();
    if (!(name !== null && name === this.lastKey && now - this.lastTime < 700)) this.past.push(this.kept);
    if (this.past.length > MOST_STEPS) this.past.shift();
    this.future = [];
    this.lastKey = name;
    this.lastTime = now;
    this.kept = { state: this.state, pinned: this.pinned };
    this.dispatchEvent(new Event("steps"));
  }

  undo() { this.#step(this.past, this.future, "undo"); }
  redo() { this.#step(this.future, this.past, "redo"); }

  #step(from, to, by) {
    this.settle();
    if (!from.length) return;
    to.push(this.kept);
    this.kept = from.pop();
    this.lastKey = null;
    this.replace(this.kept.state, this.kept.pinned, by);
    this.dispatchEvent(new Event("steps"));
  }

  #tell(keys, by) {
    this.dispatchEvent(new CustomEvent("change", { detail: { keys, by } }));
  }
}
