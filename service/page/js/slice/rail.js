// The slider through a cell, over the averaged profile along its way: where there is something to see.

import { el, fill, number } from "../dom.js";
import { short } from "../numbers.js";
import { askJson, productAddress } from "../service.js";
import { spark } from "../spark.js";
import { onTheme } from "../theme.js";
import { treatmentMembers } from "../treatment.js";

const SAMPLES = 241;

export class Rail {
  /** `moved(value)` is called at every step of the slider. */
  constructor(host, moved) {
    this.canvas = el("canvas", { class: "rail-curve", "aria-hidden": "true" });
    this.slider = el("input", { type: "range", class: "rail-slider", oninput: () => this.#slid(), onkeydown: (event) => this.#key(event) });
    this.typed = el("div", {});
    this.moved = moved;
    this.host = host;
    this.element = el("div", { class: "rail" }, el("div", { class: "rail-track" }, this.canvas, this.slider), this.typed);
    fill(host, this.element);
    this.watch = new ResizeObserver(() => this.#draw());
    this.watch.observe(this.canvas);
    onTheme(() => this.#draw());
  }

  /** Put the slider on its way; `family` are the indices of the planes it goes through. */
  set(way, family, context) {
    this.element.hidden = !way;
    if (!way) return;
    this.way = way;
    const { slider } = this;
    slider.min = way.least;
    slider.max = way.most;
    slider.step = way.step;
    slider.value = String(way.value);
    slider.setAttribute("aria-label", way.unit ? `Offset along the normal of (${family.join(" ")}), ångström` : "Height in the cell, as a fraction");
    this.#told(way.value);
    fill(
      this.typed,
      number(way.unit ? Number(way.value.toFixed(3)) : Number(way.value.toFixed(4)), (value) => value !== null && this.#take(value), { class: "rail-number", "aria-label": way.unit ? "Offset, Å" : "Height, fraction" }),
      el("span", { class: "quiet" }, way.unit || "of the cell"),
    );
    this.#load(family, context);
  }

  #take(value) {
    this.slider.value = String(value);
    this.#told(value);
    this.moved(value);
  }

  #slid() {
    const value = Number(this.slider.value);
    this.#told(value);
    const box = this.typed.querySelector("input");
    if (box) box.value = String(Number(value.toFixed(this.way.unit ? 3 : 4)));
    this.#draw();
    this.moved(value);
  }

  #key(event) {
    if (!event.shiftKey || !["ArrowLeft", "ArrowRight"].includes(event.key)) return;
    event.preventDefault();
    const pace = (event.key === "ArrowLeft" ? -10 : 10) * this.way.step;
    this.slider.value = String(Number(this.slider.value) + pace);
    this.#slid();
  }

  #told(value) {
    this.slider.setAttribute("aria-valuetext", this.way.unit ? `${short(value)} ångström` : `${short(value)} of the cell`);
  }

  async #load(family, { record, state }) {
    const members = { normal_to: family, "average.kind": "lateral", samples: SAMPLES, ...treatmentMembers(state) };
    const address = productAddress(record.id, "profile", members, "json");
    if (address === this.address) return this.#draw();
    this.address = address;
    this.values = null;
    this.#draw();
    try {
      const answer = await askJson(address);
      if (address !== this.address) return;
      this.values = answer.values;
      this.#draw();
    } catch {
      // The rail is a help to find one's way; the map itself says what is wrong.
    }
  }

  #draw() {
    if (!this.way) return;
    spark(this.canvas, this.values, (Number(this.slider.value) - this.way.least) / (this.way.most - this.way.least));
  }
}
