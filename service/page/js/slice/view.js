// A slice: a map on a plane, a slider through the cell, contours, and what the map says as a table.

import { announce, choice, el, field, fill, number, table, tick } from "../dom.js";
import { vector } from "../lattice.js";
import { Latest } from "../latest.js";
import { short, triple, unitText } from "../numbers.js";
import { clearProblem, showProblem } from "../problem.js";
import { remarks } from "../profile/view.js";
import { askJson, productAddress } from "../service.js";
import { change, note } from "../state.js";
import { takeAlong } from "../take.js";
import { onTheme, theme } from "../theme.js";
import { hasSigma, treatmentMembers, wantsSigma } from "../treatment.js";
import { SliceMap } from "./map.js";
import { AXES, edgeNames, familyOf, indicesOf, planeMembers, planeWords, wayOf, widthOf } from "./plane.js";
import { Rail } from "./rail.js";
import { isHeld, samplesOf } from "./samples.js";

const SETTLED = 220;

export function sliceView() {
  const controls = el("div", { class: "controls" });
  const trouble = el("div", { "aria-live": "polite" });
  const title = el("h1", {});
  const railHost = el("div", {});
  const picture = el("div", { class: "map-part" });
  const looks = el("section", { class: "side-part" });
  const found = el("section", { class: "side-part" });
  const notes = el("div", {});
  const take = el("section", { class: "take" });
  let context = null;
  let whole = null;
  let map = null;
  let settled = 0;
  let before = null;

  const rail = new Rail(railHost, (value) => {
    const { member } = wayOf(context.state, context.lattice);
    note({ [member]: value });
    wish();
  });

  const latest = new Latest(
    (wanted) => samplesOf(context.record, "slice", wanted.members),
    (wanted, samples, more) => arrived(wanted, samples, more),
    (fault) => {
      showProblem(trouble, fault);
      picture.removeAttribute("aria-busy");
      // What is still drawn is not what was asked for.
      picture.classList.add("stale");
      context.report(null);
    },
  );
  onTheme(() => {
    if (map?.samples && context) map.show(map.samples, options());
  });

  function quantity() {
    const { state, record } = context;
    return hasSigma(record) && state.field !== "response" && state.field !== "gradient_magnitude" ? state.show : "value";
  }

  function members() {
    const { state, record, lattice } = context;
    const shown = quantity();
    return {
      ...planeMembers(state, lattice, state.d_min ?? record.d_min),
      ...treatmentMembers(state),
      quantity: shown === "value" ? null : shown,
    };
  }

  function wish() {
    performance.mark("slice-wished");
    latest.wish({ members: members(), at: performance.now() });
  }

  function options() {
    const { state, lattice } = context;
    const own = state.scale === "own";
    // Only values have a scale that is common to the cell: it comes with the moments of the whole cell.
    const common = quantity() === "value" && lattice.dimension > 2 ? commonScale(state.scale, whole) : null;
    return {
      lattice,
      palette: state.palette,
      low: own ? state.low : (common?.minimum ?? null),
      high: own ? state.high : (common?.maximum ?? null),
      contours: state.contours,
      step: state.step,
      zero: state.zero,
      sigmaRms: map?.sigmaRms ?? null,
      names: edgeNames(state, lattice),
      words: planeWords(state, lattice),
    };
  }

  function arrived(wanted, samples, more) {
    clearProblem(trouble);
    picture.removeAttribute("aria-busy");
    picture.classList.remove("stale");
    map ??= new SliceMap(picture);
    map.show(samples, options());
    performance.measure("slice-shown", { start: wanted.at });
    clearTimeout(settled);
    if (!more) settled = setTimeout(() => rest(wanted, samples), SETTLED);
  }

  /** Once the hand rests: σ, tables, what to take along, and the neighbours beforehand. */
  async function rest(wanted, samples) {
    const { state, record, lattice, report } = context;
    report({ ...samples.summary, unit: samples.unit });
    fill(title, planeWords(state, lattice), place());
    fill(found, whatIsThere(samples, map));
    fill(notes, remarks(samples));
    offer(wanted.members);
    announce(`${planeWords(state, lattice)}${place()}: from ${short(samples.summary.minimum)} to ${short(samples.summary.maximum)} ${unitText(samples.unit)}`);
    if (quantity() === "value" && wantsSigma(state, record)) {
      try {
        const sigma = await samplesOf(record, "slice", { ...wanted.members, quantity: "sigma" });
        if (map?.samples !== samples) return;
        map.sigmaRms = sigma.summary.rms;
        if (state.contours === "sigma") map.show(samples, options());
        map.setSigma(sigma);
      } catch (fault) {
        showProblem(trouble, fault);
      }
    }
    beforehand();
  }

  /** Fetch the neighbours on the slider's way while nothing else is wanted. */
  async function beforehand() {
    const way = wayOf(context.state, context.lattice);
    if (!way) return;
    const here = context;
    for (const steps of [1, -1, 2, -2, 3, -3]) {
      if (latest.busy || context !== here) return;
      const state = { ...context.state, [way.member]: Number((context.state[way.member] + steps * way.step).toFixed(6)) };
      const near = { ...members(), ...planeMembers(state, context.lattice, state.d_min ?? context.record.d_min) };
      if (!isHeld(context.record, "slice", near)) await samplesOf(context.record, "slice", near).catch(() => null);
    }
  }

  function place() {
    const way = wayOf(context.state, context.lattice);
    if (!way) return "";
    return way.unit ? `, ${short(context.state.offset)} Å along the normal` : `, at ${short(context.state.height, 3)} of ${context.lattice.names[familyOf(context.state, context.lattice).indexOf(1)]}`;
  }

  function offer(wanted) {
    const { state, record } = context;
    const drawn = options();
    takeAlong(take, record, [
      {
        product: "slice",
        members: wanted,
        formats: ["npy", "npz", "png", "svg"],
        pictured: {
          "picture.title": record.name,
          "picture.theme": theme(),
          "picture.palette": state.palette,
          "picture.low": drawn.low,
          "picture.high": drawn.high,
          "picture.level_step": map?.step || null,
          "picture.zero_contour": map?.step && state.zero ? true : null,
        },
      },
    ]);
  }

  async function load() {
    const here = context;
    const { state, record, lattice } = here;
    fill(title, planeWords(state, lattice), place());
    const key = JSON.stringify(treatmentMembers(state)) + record.id;
    picture.setAttribute("aria-busy", "true");
    offer(members());
    if (lattice.dimension > 2 && key !== before) {
      before = key;
      whole = null;
      try {
        whole = await askJson(productAddress(record.id, "statistics", treatmentMembers(state)));
      } catch {
        // Without the whole cell's range each slice has a scale of its own; what is wrong the slice says.
        whole = null;
      }
    }
    if (context === here) wish();
  }

  const element = el(
    "div",
    { class: "view" },
    el("div", { class: "view-head" }, title, controls),
    trouble,
    el("div", { class: "picture-part" }, railHost, picture, notes),
    el("div", { class: "side" }, looks, found),
    take,
  );

  return {
    element,
    update(given, changed) {
      context = given;
      if (!changed) {
        // Another set, or a view that was left: what is still drawn is of before.
        picture.classList.add("stale");
        if (map) map.sigmaRms = null;
      }
      drawControls(controls, context);
      drawLooks(looks, context);
      rail.set(wayOf(context.state, context.lattice), familyOf(context.state, context.lattice), context);
      load();
    },
    leave() {
      latest.drop();
      clearTimeout(settled);
    },
  };
}

function drawControls(host, { state, record, lattice }) {
  const many = field(
    "Cells",
    choice([1, 2, 3].map((cells) => [String(cells), `${cells} × ${cells}`]), String(state.cells), (cells) => change({ cells: Number(cells) })),
  );
  if (lattice.dimension === 2) return fill(host, many);
  const indices = el("input", {
    type: "text",
    class: "indices",
    autocomplete: "off",
    ".value": indicesOf(state).join(", "),
    onchange: (event) => {
      const found = vector(event.target.value, 3, true);
      event.target.setCustomValidity(found ? "" : "Give 3 whole numbers, not all 0.");
      if (event.target.reportValidity()) change({ hkl: found.join(","), offset: 0 });
    },
  });
  return fill(
    host,
    field("Plane", choice([["cell", "along the cell"], ["plane", "by indices (hkl)"]], state.cut, (cut) => change({ cut }))),
    state.cut === "plane"
      ? [
          field("Indices", indices),
          field("Width, Å", number(widthOf(state, lattice), (width) => change({ width }), { min: 0.1 })),
        ]
      : [field("Axes", choice(AXES, state.axes, (axes) => change({ axes, height: state.height }))), many],
  );
}

function drawLooks(host, { state, record, lattice }) {
  const errors = hasSigma(record);
  const scales = [
    ...(lattice.dimension > 2 ? [["detail", "near the mean, −3 to +6 rms"], ["cell", "whole range of the cell"]] : []),
    ["slice", lattice.dimension > 2 ? "of this slice" : "of the plane"],
    ["own", "my own limits"],
  ];
  fill(
    host,
    el("h2", {}, "How it looks"),
    errors ? field("Show", choice([["value", "values"], ["sigma", "σ"], ["significance", "values in units of σ"]], state.show, (show) => change({ show }))) : null,
    field("Colours", choice([["auto", "as the values are"], ["sequential", "sequential"], ["diverging", "diverging from 0"]], state.palette, (palette) => change({ palette }))),
    field("Scale", choice(scales, lattice.dimension === 2 && state.scale !== "own" ? "slice" : state.scale, (scale) => change({ scale }))),
    state.scale === "own"
      ? el("div", { class: "pair" }, field("from", number(state.low, (low) => change({ low }))), field("to", number(state.high, (high) => change({ high }))))
      : null,
    el(
      "div",
      { class: "pair" },
      field(
        "Contours",
        choice([["auto", "at even steps"], ["step", "at steps of …"], errors ? ["sigma", "in σ"] : null, ["none", "none"]].filter(Boolean), state.contours, (contours) => change({ contours, step: null })),
      ),
      state.contours === "step" || state.contours === "sigma"
        ? field(state.contours === "sigma" ? "every … σ" : "step", number(state.step ?? (state.contours === "sigma" ? 3 : null), (step) => change({ step }), { min: 1e-12, required: state.contours === "step" }))
        : null,
    ),
    state.contours === "none" ? null : tick("also at zero", state.zero, (zero) => change({ zero })),
  );
}

/** Ends of a scale that all slices share: the cell's whole range, or what is near its mean, where detail is. */
function commonScale(kind, whole) {
  if (!whole || kind === "slice") return null;
  const { minimum, maximum, mean, standard_deviation: deviation } = whole;
  if (kind === "cell") return { minimum, maximum };
  return { minimum: Math.max(minimum, mean - 3 * deviation), maximum: Math.min(maximum, mean + 6 * deviation) };
}

/** The picture in words: extremes with their places, and a coarse table of values. */
function whatIsThere(samples, map) {
  const { values, first, second, unit } = samples;
  let [least, most] = [0, 0];
  for (let i = 1; i < values.length; i += 1) {
    if (values[i] < values[least]) least = i;
    if (values[i] > values[most]) most = i;
  }
  const at = (index) => map.positionOf([Math.floor(index / second.count), index % second.count]).fractional;
  const rows = [
    ["largest", most],
    ["smallest", least],
  ].map(([name, index]) => el("tr", {}, el("th", { scope: "row" }, name), el("td", {}, short(values[index])), el("td", {}, triple(at(index)))));
  const pick = (count) => Array.from({ length: 7 }, (_, i) => Math.round((i * (count - 1)) / 6));
  const coarse = pick(second.count)
    .reverse()
    .map((j) => el("tr", {}, el("th", { scope: "row" }, short(j * second.step, 3)), pick(first.count).map((i) => el("td", {}, short(values[i * second.count + j], 3)))));
  return [
    el("h2", {}, "What is there"),
    table(`On this plane, ${unitText(unit)}`, ["", "value", "fractional position"], rows),
    el("p", { class: "quiet" }, `mean ${short(samples.summary.mean)}, rms ${short(samples.summary.rms)}`),
    el(
      "details",
      {},
      el("summary", {}, "The map as a coarse table"),
      table("Values; first axis to the right, second upwards, Å from the lower left corner", ["", ...pick(first.count).map((i) => short(i * first.step, 3))], coarse),
    ),
  ];
}
