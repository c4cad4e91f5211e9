// Intervals on a profile and their integrals: dragged on the curve or typed, listed, labelled, removable.

import { announce, button, el, field, fill } from "../dom.js";
import { short, withSigma } from "../numbers.js";
import { showProblem } from "../problem.js";
import { nested, post } from "../service.js";
import { lengthOf, regionOf } from "./line.js";
import { treatmentMembers } from "../treatment.js";

const MOST = 40;

/** The list in the address: from~to~label;… with labels percent-coded. */
export function readIntervals(text) {
  return String(text)
    .split(";")
    .map((part) => {
      const [from, to, label] = part.split("~");
      return { from: Number(from), to: Number(to), label: decode(label ?? "") };
    })
    .filter((one) => Number.isFinite(one.from) && Number.isFinite(one.to) && one.to > one.from)
    .slice(0, MOST);
}

export function writeIntervals(list) {
  return list.map((one) => `${Number(one.from.toFixed(4))}~${Number(one.to.toFixed(4))}~${encodeURIComponent(one.label)}`).join(";");
}

function decode(text) {
  try {
    return decodeURIComponent(text).slice(0, 80);
  } catch {
    return text.slice(0, 80);
  }
}

export class Intervals {
  constructor(host, { highlight, changed }) {
    this.list = [];
    this.highlight = highlight;
    this.changed = changed;
    this.turn = 0;
    this.trouble = el("div", { "aria-live": "polite" });
    this.rows = el("ul", { class: "intervals" });
    const from = el("input", { type: "number", step: "any", required: true, autocomplete: "off" });
    const to = el("input", { type: "number", step: "any", required: true, autocomplete: "off" });
    const form = el(
      "form",
      {
        class: "pair",
        onsubmit: (event) => {
          event.preventDefault();
          this.add(Number(from.value), Number(to.value));
          form.reset();
        },
      },
      field("from, Å", from),
      field("to, Å", to),
      el("button", { type: "submit" }, "Integrate"),
    );
    fill(host, el("h2", {}, "Integrals"), el("p", { class: "quiet" }, "Drag along the curve, or type an interval."), this.trouble, this.rows, form);
  }

  setContext(context, line) {
    this.context = context;
    this.line = line;
  }

  add(from, to) {
    if (from > to) [from, to] = [to, from];
    if (!(to > from)) {
      return showProblem(this.trouble, { title: "There is no interval", message: "Both ends are one place: give two that differ." });
    }
    const label = `interval ${this.list.length + 1}`;
    return this.changed(writeIntervals([...this.list, { from, to, label }]));
  }

  /** Show what the address holds, and have it integrated. */
  async show(text, line) {
    this.list = readIntervals(text);
    this.turn += 1;
    const mine = this.turn;
    const { record, state } = this.context;
    if (state.field !== "density") {
      this.#draw([]);
      if (this.list.length) fill(this.rows, el("li", { class: "quiet" }, "Integrals are of the density: choose it as field."));
      return;
    }
    this.#draw([]);
    if (!this.list.length) return fill(this.trouble);
    try {
      const length = lengthOf(line, this.context);
      const regions = this.list.map((one, i) => ({ ...regionOf(line, one.from, one.to, length), label: one.label || `interval ${i + 1}` }));
      const answer = await post("/v1/integrals", { set_id: record.id, ...nested(treatmentMembers(state)), regions });
      if (mine !== this.turn) return;
      fill(this.trouble);
      this.#draw(answer.integrals);
      const newest = answer.integrals.at(-1);
      announce(`${newest.label}: ${withSigma(newest.integral, newest.sigma)} ${newest.unit}`);
    } catch (fault) {
      if (mine === this.turn) showProblem(this.trouble, fault);
    }
  }

  #draw(integrals) {
    fill(
      this.rows,
      this.list.map((one, place) => {
        const found = integrals[place];
        const label = el("input", {
          type: "text",
          class: "label",
          maxlength: 80,
          autocomplete: "off",
          ".value": one.label,
          "aria-label": `Label of the interval from ${short(one.from)} to ${short(one.to)} ångström`,
          onchange: () => this.changed(writeIntervals(this.list.map((other, i) => (i === place ? { ...other, label: label.value } : other)))),
        });
        return el(
          "li",
          { "data-place": place, onpointerenter: () => this.highlight(place), onpointerleave: () => this.highlight(null) },
          el("div", { class: "row" }, label, button("Remove", () => this.changed(writeIntervals(this.list.filter((_, i) => i !== place))), { class: "plain", "aria-label": `Remove ${one.label || "the interval"}` })),
          el("div", { class: "figures" },
            el("strong", {}, found ? `${withSigma(found.integral, found.sigma)} ${found.unit}` : "…"),
            el("span", { class: "quiet" }, `${short(one.from)} to ${short(one.to)} Å${found ? `, mean ${withSigma(found.mean, found.mean_sigma)}` : ""}`),
            found?.scattering_length != null ? el("span", { class: "quiet" }, `${withSigma(found.scattering_length, found.scattering_length_sigma)} ${found.scattering_length_unit}`) : null,
          ),
        );
      }),
    );
  }
}
