// The controls: a length typed with its unit or dragged, a choice, a switch. Each knows how to show a state and how to change it.

import { parse } from "./api.js";

let count = 0;

const make = (tag, properties = {}, ...children) => {
  const element = Object.assign(document.createElement(tag), properties);
  element.append(...children);
  return element;
};

const SCALES = {
  log: { to: (t, low, high) => low * (high / low) ** t, from: (v, low, high) => Math.log(v / low) / Math.log(high / low) },
  linear: { to: (t, low, high) => low + (high - low) * t, from: (v, low, high) => (v - low) / (high - low) },
  // Fine at its low end, which is zero: for thin plates.
  square: { to: (t, low, high) => low + (high - low) * t * t, from: (v, low, high) => Math.sqrt(Math.max(v - low, 0) / (high - low)) },
};
const STEPS = 1000;
const round3 = (value) => Number(Number(value).toPrecision(3));

class Field {
  constructor(bench, { key, label, when, hint }) {
    this.bench = bench;
    this.key = key;
    this.label = label;
    this.when = when;
    this.id = `field-${key}-${(count += 1)}`;
    this.message = make("p", { className: "message", id: `${this.id}-message`, hidden: true });
    this.hint = hint ? make("p", { className: "hint", id: `${this.id}-hint`, textContent: hint }) : null;
    this.element = make("div", { className: "field" });
  }

  refuse(text) {
    this.message.textContent = text || "";
    this.message.hidden = !text;
    for (const [i, input] of this.element.querySelectorAll("input, select").entries()) {
      if (text && i === 0) {
        input.setAttribute("aria-invalid", "true");
        input.setAttribute("aria-describedby", this.message.id);
      } else {
        input.removeAttribute("aria-invalid");
        if (this.hint) input.setAttribute("aria-describedby", this.hint.id);
        else input.removeAttribute("aria-describedby");
      }
    }
  }

  show(state, context) {
    this.element.hidden = this.when ? !this.when(state, context) : false;
    if (!this.element.hidden) this.draw(state, context);
  }

  finish() {
    if (this.hint) this.element.append(this.hint);
    this.element.append(this.message);
    this.refuse("");
    return this;
  }
}

export class Quantity extends Field {
  // kind: how the server parses it. value(state, context): what stands when the state has null.
  constructor(bench, options) {
    super(bench, options);
    const { kind, low, high, scale = "linear", text, step, endless = false, value, rounding = round3 } = options;
    Object.assign(this, { kind, low, high, text, endless, value, rounding, scale: SCALES[scale] });
    this.input = make("input", { type: "text", id: this.id, autocomplete: "off", spellcheck: false, inputMode: "text" });
    this.slider = make("input", { type: "range", min: 0, max: STEPS, step: step || 1 });
    this.slider.setAttribute("aria-label", `${this.label}, slider`);
    this.element.classList.add("quantity");
    this.element.append(make("label", { htmlFor: this.id, textContent: this.label }), this.input, this.slider);
    this.slider.addEventListener("input", () => this.#slide());
    this.slider.addEventListener("change", () => this.bench.settle(this.key));
    this.input.addEventListener("change", () => this.#typed());
    this.input.addEventListener("keydown", (event) => this.#key(event));
    this.finish();
  }

  #slide() {
    const place = Number(this.slider.value);
    let value = this.endless && place >= STEPS ? "infinity" : this.scale.to(place / STEPS, this.low, this.high);
    if (value !== "infinity") value = this.rounding(value);
    this.refuse("");
    this.bench.change({ [this.key]: value }, { moving: true, by: this });
    this.input.value = this.text(value);
    this.slider.setAttribute("aria-valuetext", this.text(value));
  }

  #key(event) {
    if (event.key === "Enter") this.#typed();
    if (event.key !== "ArrowUp" && event.key !== "ArrowDown") return;
    event.preventDefault();
    const by = (event.key === "ArrowUp" ? 1 : -1) * (event.shiftKey ? 40 : 4);
    this.slider.value = Number(this.slider.value) + by;
    this.#slide();
    this.bench.settle(this.key);
  }

  async #typed() {
    const typed = this.input.value.trim();
    if (typed === this.shown && !this.input.hasAttribute("aria-invalid")) return;
    this.shown = typed;
    try {
      const { value } = await parse(this.kind, typed, this.key);
      this.refuse("");
      this.bench.change({ [this.key]: value === Infinity ? "infinity" : value });
    } catch (error) {
      this.refuse(error.message);
    }
  }

  draw(state, context) {
    const value = state[this.key] ?? (this.value ? this.value(state, context) : null);
    const known = value !== null && value !== undefined;
    const place = !known ? STEPS / 2 : value === "infinity" || value === Infinity ? STEPS : this.scale.from(Number(value), this.low, this.high) * STEPS;
    const inHand = document.activeElement === this.slider && Math.abs(Number(this.slider.value) - place) < 3;
    if (Number.isFinite(place) && !inHand) this.slider.value = Math.min(STEPS, Math.max(0, Math.round(place)));
    this.shown = known ? this.text(value) : "";
    this.slider.setAttribute("aria-valuetext", this.shown || "not told");
    if (!this.input.hasAttribute("aria-invalid")) this.input.value = this.shown; // what was refused stays, to be mended
  }
}

export class Choice extends Field {
  // options(context) -> [[value, text]]; get and set translate between the state and the choice.
  constructor(bench, options) {
    super(bench, options);
    this.options = options.options;
    this.get = options.get || ((state) => state[this.key]);
    this.set = options.set || ((value) => ({ [this.key]: value }));
    this.select = make("select", { id: this.id });
    this.element.classList.add("choice");
    this.element.append(make("label", { htmlFor: this.id, textContent: this.label }), this.select);
    this.select.addEventListener("change", () => {
      this.refuse("");
      const patch = this.set(this.select.value, this.bench.state);
      if (patch) this.bench.change(patch);
      else this.show(this.bench.state, this.context);
    });
    this.finish();
  }

  draw(state, context) {
    this.context = context;
    const options = this.options(context, state);
    const key = JSON.stringify(options);
    if (key !== this.filled) {
      this.select.replaceChildren(...options.map(([value, text]) => make("option", { value, textContent: text })));
      this.filled = key;
    }
    this.select.value = this.get(state, context) ?? "";
  }
}

export class Segments extends Field {
  // A row of radio buttons.
  constructor(bench, options) {
    super(bench, options);
    this.get = options.get || ((state) => state[this.key]);
    this.set = options.set || ((value) => ({ [this.key]: value }));
    const group = options.into || make("div", { className: "segments" });
    if (!options.into) {
      group.setAttribute("role", "radiogroup");
      group.setAttribute("aria-labelledby", `${this.id}-label`);
      this.element.append(make("span", { className: "name", id: `${this.id}-label`, textContent: this.label }));
    }
    this.radios = options.options.map(([value, text]) => {
      const radio = make("input", { type: "radio", name: this.id, value, id: `${this.id}-${value}` });
      radio.addEventListener("change", () => { this.refuse(""); this.bench.change(this.set(value, this.bench.state, this.context)); });
      const label = make("label", { htmlFor: radio.id, textContent: text });
      label.dataset.text = text;
      group.append(radio, label);
      return radio;
    });
    if (!options.into) this.element.append(group);
    this.finish();
  }

  draw(state, context) {
    this.context = context;
    const value = this.get(state, context);
    for (const radio of this.radios) {
      radio.checked = radio.value === String(value);
      radio.disabled = this.able ? !this.able(radio.value, state, context) : false;
    }
  }
}

export class Switch extends Field {
  constructor(bench, options) {
    super(bench, options);
    this.get = options.get || ((state) => Boolean(state[this.key]));
    this.set = options.set || ((on) => ({ [this.key]: on }));
    this.box = make("input", { type: "checkbox", id: this.id });
    this.element.classList.add("switch");
    this.element.append(make("label", { htmlFor: this.id }, this.box, make("span", { textContent: this.label })));
    this.box.addEventListener("change", () => this.bench.change(this.set(this.box.checked, this.bench.state)));
    this.finish();
  }

  draw(state, context) { this.box.checked = this.get(state, context); }
}

export class Words extends Field {
  // Plain text: the design's name, what a map means.
  constructor(bench, options) {
    super(bench, options);
    this.input = make("input", { type: "text", id: this.id, autocomplete: "off", spellcheck: false, placeholder: options.placeholder || "" });
    this.element.append(make("label", { htmlFor: this.id, textContent: this.label }), this.input);
    this.input.addEventListener("change", () => {
      const text = this.input.value.trim();
      this.refuse("");
      this.bench.change({ [this.key]: text === "" && options.empty !== undefined ? options.empty : text });
    });
    this.finish();
  }

  draw(state) { if (document.activeElement !== this.input) this.input.value = state[this.key] ?? ""; }
}

export { make };
