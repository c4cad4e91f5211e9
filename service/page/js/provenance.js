// The strip that always says what a picture was made from.

import { el, fill } from "./dom.js";
import { count, short, unitText } from "./numbers.js";
import { FIELDS, WINDOWS } from "./treatment.js";

export const STATEMENT = "A density is only as good as its phases: wrong ones give a wrong map that looks as sharp.";

/** Words for what an answer was made from: `made` is its summary with `unit`; null while there is no answer. */
export function provenance(host, state, record, made) {
  const facts = [];
  const coefficients = made?.coefficients;
  // Counted after expansion by symmetry; the zero term apart.
  const total = record.coefficients - (record.summary.coefficients.zero_term === "absent" ? 0 : 1);
  if (!coefficients) facts.push(["coefficients", `${count(total)} in the set`]);
  else {
    const left = coefficients.without_phase + coefficients.beyond_resolution;
    const reasons = [
      coefficients.without_phase ? `${count(coefficients.without_phase)} without a trusted phase` : "",
      coefficients.beyond_resolution ? `${count(coefficients.beyond_resolution)} beyond the resolution` : "",
    ].filter(Boolean);
    facts.push(
      ["coefficients", left ? `${count(total - left)} of ${count(total)} used` : `all ${count(total)} used`],
      reasons.length ? ["left out", reasons.join(", ")] : null,
    );
  }
  const whole = state.d_min === null && state.d_max === null && record.d_min !== null ? record : null;
  const resolution = made ? made.resolution : whole;
  if (resolution) facts.push(["resolution", `${short(resolution.d_max, 3)} to ${short(resolution.d_min, 3)} Å`]);
  facts.push(["window", state.window === "gaussian" ? `Gaussian, B ${short(state.window_b)} Å²` : words(WINDOWS, state.window)]);
  facts.push(["field", `${words(FIELDS, state.field).replace(/ \(.*/, "")}${state.merit ? ", weighted by merit" : ""}`]);
  facts.push(["unit", unitText(made?.unit ?? record.unit) || "none"]);
  fill(
    host,
    el("strong", { class: "set-name" }, record.name),
    el("dl", {}, facts.filter(Boolean).map(([name, value]) => el("div", {}, el("dt", {}, name), el("dd", {}, value)))),
    el("p", { class: "statement" }, STATEMENT),
  );
}

function words(options, name) {
  return options.find(([value]) => value === name)?.[1] ?? name;
}
