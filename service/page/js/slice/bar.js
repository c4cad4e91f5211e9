// The colour bar below a map: its ends, its unit, zero, and the value that is read.

import { el, fill } from "../dom.js";
import { short, unitText } from "../numbers.js";
import { SHADES } from "../palettes.js";

export class ColourBar {
  constructor() {
    this.element = el("div", { class: "colour-bar" });
    this.marker = el("span", { class: "bar-mark", hidden: true });
  }

  /** Show a scale for samples; `remarks` are sentences below it. */
  show(scale, unit, remarks) {
    this.scale = scale;
    const canvas = el("canvas", { width: SHADES, height: 1, "aria-hidden": "true" });
    const context = canvas.getContext("2d");
    const data = context.createImageData(SHADES, 1);
    data.data.set(scale.colours);
    context.putImageData(data, 0, 0);
    const signed = scale.kind === "diverging" && scale.low < 0 && scale.high > 0;
    const zero = signed ? el("span", { class: "bar-zero" }, "0") : null;
    if (zero) zero.style.left = this.#place(0);
    fill(
      this.element,
      el("div", { class: "bar-colours" }, canvas, this.marker, zero),
      el("div", { class: "bar-ends" }, el("span", {}, short(scale.low)), el("span", { class: "bar-unit" }, unitText(unit)), el("span", {}, short(scale.high))),
      el("p", { class: "quiet" }, remarks.join(" ")),
    );
  }

  /** Mark a value; null: none. */
  mark(value) {
    this.marker.hidden = value === null || !Number.isFinite(value);
    if (!this.marker.hidden) this.marker.style.left = this.#place(value);
  }

  #place(value) {
    const share = (value - this.scale.low) / (this.scale.high - this.scale.low);
    return `${100 * Math.min(1, Math.max(0, share))}%`;
  }
}
