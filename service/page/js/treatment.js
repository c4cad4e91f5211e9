// How the density is made: field, resolution, window, errors, phases. Common to all views.

import { choice, el, field, fill, number, tick } from "./dom.js";
import { short } from "./numbers.js";
import { change } from "./state.js";

export const FIELDS = [
  ["density", "density"],
  ["gradient_magnitude", "size of the gradient"],
  ["laplacian", "Laplacian"],
  ["autocorrelation", "autocorrelation (needs no phases)"],
  ["response", "response to a point"],
];

export const WINDOWS = [
  ["none", "none"],
  ["lanczos", "Lanczos"],
  ["raised_cosine", "raised cosine"],
  ["gaussian", "Gaussian"],
];

/** Members of a request that say how the density is made. */
export function treatmentMembers(state) {
  return {
    field: state.field === "density" ? null : state.field,
    "resolution.d_min": state.d_min,
    "resolution.d_max": state.d_max,
    "window.kind": state.window === "none" ? null : state.window,
    "window.b": state.window === "gaussian" ? state.window_b : null,
    apply_merit: state.merit || null,
    "trust.least_merit": state.least_merit,
    "trust.largest_sigma_deg": state.phase_sigma,
  };
}

/** Members of `state` that change what is summed. */
export const TREATMENT = ["field", "d_min", "d_max", "window", "window_b", "merit", "least_merit", "phase_sigma"];

/** Whether standard uncertainties can be had. */
export function hasSigma(record) {
  return record.summary.columns.includes("sigma");
}

/** Whether they are wanted and can be had of this field. */
export function wantsSigma(state, record) {
  return state.sigma && hasSigma(record) && state.field !== "response" && state.field !== "gradient_magnitude";
}

/** The panel; drawn anew when set or treatment change. */
export function treatmentPanel(host, state, record) {
  const columns = record.summary.columns;
  const finest = record.d_min;
  const coarsest = record.d_max;
  // A slider over the logarithm: resolution is felt in ratios.
  const place = state.d_min === null ? 0 : Math.log(state.d_min / finest) / Math.log(Math.max(1.001, coarsest / finest));
  const slider = el("input", {
    type: "range",
    min: 0,
    max: 1,
    step: 0.005,
    ".value": String(Math.min(1, Math.max(0, place))),
    "aria-label": "Finest spacing used, from all coefficients to few",
    "aria-valuetext": state.d_min === null ? "all coefficients" : `${short(state.d_min)} ångström`,
    onchange: (event) => {
      const share = Number(event.target.value);
      const chosen = finest * (coarsest / finest) ** share;
      change({ d_min: share === 0 ? null : Number(chosen.toPrecision(4)) });
    },
  });
  const phases = [];
  if (columns.includes("merit")) {
    phases.push(
      field(
        "Least figure of merit",
        number(state.least_merit, (value) => change({ least_merit: value }), { min: 0, max: 1, placeholder: "0: all" }),
        "Phases below it are taken as unknown, and their coefficients left out.",
      ),
      tick("weight by the figure of merit", state.merit, (on) => change({ merit: on })),
    );
  }
  if (columns.includes("phase_sigma")) {
    phases.push(
      field(
        "Largest phase error, degrees",
        number(state.phase_sigma, (value) => change({ phase_sigma: value }), { min: 0.001, placeholder: "any" }),
      ),
    );
  }
  if (!phases.length) phases.push(el("p", { class: "quiet" }, "The set does not say how sure its phases are."));
  fill(
    host,
    el("h2", {}, "How it is made"),
    field("Field", choice(FIELDS, state.field, (name) => change({ field: name }))),
    el(
      "fieldset",
      {},
      el("legend", {}, "Resolution"),
      finest === null
        ? null
        : [
            slider,
            el("p", { class: "ends" }, el("span", {}, `all, ${short(finest, 3)} Å`), el("span", {}, `${short(coarsest, 3)} Å`)),
          ],
      el(
        "div",
        { class: "pair" },
        field("d from, Å", number(state.d_min, (value) => change({ d_min: value }), { min: 1e-6, placeholder: short(finest, 4) })),
        field("to, Å", number(state.d_max, (value) => change({ d_max: value }), { min: 1e-6, placeholder: short(coarsest, 4) })),
      ),
    ),
    el(
      "div",
      { class: "pair" },
      field("Termination window", choice(WINDOWS, state.window, (name) => change({ window: name }))),
      state.window === "gaussian"
        ? field("B, Å²", number(state.window_b, (value) => value && change({ window_b: value }), { min: 1e-6, required: true }))
        : null,
    ),
    el(
      "fieldset",
      {},
      el("legend", {}, "Errors and phases"),
      tick("show standard uncertainties", state.sigma, (on) => change({ sigma: on }), !hasSigma(record)),
      hasSigma(record) ? null : el("p", { class: "quiet" }, "The set has none."),
      phases,
    ),
  );
}
