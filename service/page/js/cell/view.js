// The whole cell: surfaces of equal value in space, and the extrema, each marked where it is.

import { Quaternion } from "../../vendor/three/three.module.js";
import { announce, button, choice, el, field, fill, number, table, tick } from "../dom.js";
import { count, fixed, inBrackets, short, triple, unitText } from "../numbers.js";
import { clearProblem, showProblem } from "../problem.js";
import { ask, askJson, isAbort, productAddress } from "../service.js";
import { change, note } from "../state.js";
import { takeAlong } from "../take.js";
import { onTheme, theme } from "../theme.js";
import { hasSigma, treatmentMembers } from "../treatment.js";
import { readGlb } from "./glb.js";
import { CellScene, canDraw } from "./scene.js";

const MOST_SAMPLES = 2_000_000;
const PREVIEW_SAMPLES = 40_000;
const COUNTS = [
  ["rms", "rms deviations above the mean"],
  ["sigmas", "standard uncertainties"],
  ["value", "the unit of the field"],
];
const KINDS = [
  ["maximum", "maxima"],
  ["minimum", "minima"],
  ["maximum,minimum", "maxima and minima"],
  ["none", "none"],
];

export function cellView() {
  const controls = el("div", { class: "controls" });
  const trouble = el("div", { "aria-live": "polite" });
  const title = el("h1", {}, "The whole cell");
  const picture = el("div", { class: "space-part" });
  const caption = el("p", { class: "readout" });
  const sought = el("div", {});
  const extrema = el("div", {});
  const notes = el("div", {});
  const take = el("section", { class: "take" });
  let scene = null;
  let context = null;
  let abort = null;
  let moments = null;
  let found = null;
  let asked = "";

  onTheme(() => scene?.recolour());

  function ready() {
    if (scene) return true;
    if (!canDraw()) {
      fill(picture, el("div", { class: "problem", role: "alert" }, el("strong", {}, "This browser cannot draw in space"), el("p", {}, "WebGL 2 is off or missing: switch it on in the browser's settings, or look at the slices. The surface can be downloaded as glTF below, and the extrema are in the table.")));
      return false;
    }
    scene = new CellScene(picture, {
      turned: (turn, zoom) => note({ turn: turn.toArray().map((part) => part.toFixed(4)).join(","), zoom: Number(zoom.toFixed(3)) }),
      pointed: (place) => mark(place, false),
    });
    return true;
  }

  function mark(place, told) {
    scene?.highlight(place);
    for (const row of extrema.querySelectorAll("tr[data-place]")) row.classList.toggle("marked", Number(row.dataset.place) === place);
    if (told && place !== null) announce(`Extremum ${found.extrema[place].number} at ${triple(found.extrema[place].fractional)}`);
  }

  /** Members of the grid whose surface is wanted. */
  function surfaceMembers(state, preview, below) {
    const level = below ? -state.level : state.level;
    return { ...gridMembers(preview), ...{ rms: { "surface.level_rms": level }, sigmas: { "surface.level_sigmas": level }, value: { "surface.level": level } }[state.count_in] };
  }

  function gridMembers(preview) {
    const { state, record, lattice } = context;
    const wanted = (state.d_min ?? record.d_min) / (preview ? 2 : 4);
    const least = Math.cbrt(lattice.volume / (preview ? PREVIEW_SAMPLES : MOST_SAMPLES));
    return { spacing: Number(Math.max(wanted, least).toPrecision(3)), ...treatmentMembers(state) };
  }

  async function load() {
    const here = context;
    const { state, record, lattice, report } = here;
    abort?.abort();
    abort = new AbortController();
    const { signal } = abort;
    const drawn = ready();
    const key = JSON.stringify([record.id, lattice.vectors]);
    if (drawn && scene.key !== key) {
      scene.setLattice(lattice);
      scene.key = key;
    }
    if (drawn) orient(state);
    offer();
    picture.setAttribute("aria-busy", "true");
    fill(caption, el("span", { class: "quiet" }, "A coarse surface first …"));
    loadExtrema(here);
    try {
      moments = await askJson(productAddress(record.id, "statistics", treatmentMembers(state)), { signal });
      for (const preview of [true, false]) {
        const sides = state.below ? [false, true] : [false];
        const surfaces = await Promise.all(sides.map((below) => surfaceOf(record, surfaceMembers(state, preview, below), below, signal)));
        if (context !== here) return;
        clearProblem(trouble);
        if (drawn) scene.setSurfaces(surfaces);
        tell(surfaces, preview);
        if (!preview) told(surfaces, report, here);
      }
    } catch (fault) {
      if (isAbort(fault) || context !== here) return;
      fill(caption);
      scene?.setSurfaces([]);
      report(null);
      showProblem(trouble, cured(fault));
    } finally {
      if (context === here) picture.removeAttribute("aria-busy");
    }
  }

  /** An optional package that the server lacks: said with the cure. */
  function cured(fault) {
    if (fault.status !== 501) return fault;
    return Object.assign(new Error(`${fault.message} Until then the slices show the same density.`), { title: "The server cannot make surfaces yet" });
  }

  function tell(surfaces, preview) {
    const { unit } = moments;
    const words = surfaces.map(({ glb, below, none }) => {
      if (none) return el("span", { class: "key below" }, `below: ${none}`);
      const { level, fraction_above: above } = glb.extras;
      const share = below ? 1 - above : above;
      const size = Number.isFinite(share) ? `, ${fixed(100 * share, 1)} % of the cell ${below ? "below" : "above"}` : "";
      return el("span", { class: below ? "key below" : "key" }, `${short(level)} ${unitText(unit)}${size}`);
    });
    const triangles = surfaces.reduce((sum, { glb }) => sum + glb.indices.length / 3, 0);
    fill(caption, words, el("span", { class: "quiet" }, preview ? "coarse, the fine one follows …" : `${count(triangles)} triangles`));
    scene?.box.setAttribute(
      "aria-label",
      `Surface at ${surfaces.filter(({ none }) => !none).map(({ glb }) => `${short(glb.extras.level)} ${unitText(unit)}`).join(" and ")}. Arrow keys turn it, comma and full stop roll it, plus and minus zoom, Home brings the first view back.`,
    );
  }

  function told(surfaces, report, { state, record }) {
    const extras = surfaces[0].glb.extras;
    const lines = [...(extras.applied ?? moments.applied), ...(extras.notes ?? [])];
    fill(notes, el("details", { class: "remarks" }, el("summary", {}, `How it was made, and what to know (${lines.length})`), el("ul", {}, lines.map((line) => el("li", {}, line)))));
    report({ ...extras.summary, unit: moments.unit });
    announce(`Surface at ${short(extras.level)} ${unitText(moments.unit)} drawn`);
  }

  function orient(state) {
    const parts = state.turn.split(",").map(Number);
    if (state.turn && parts.length === 4 && parts.every(Number.isFinite)) scene.turntable.set(new Quaternion(...parts), state.zoom);
    else scene.turntable.set(scene.turntable.start.turn, state.zoom);
    scene.draw();
  }

  async function loadExtrema(here) {
    const { state, record } = here;
    if (state.kinds === "none" || state.field !== "density") {
      asked = "";
      found = null;
      scene?.setExtrema([]);
      return fill(extrema, state.field === "density" ? null : el("p", { class: "quiet" }, "Extrema are of the density: choose it as field."));
    }
    const members = { kinds: state.kinds, most: state.most, ...treatmentMembers(state) };
    const address = productAddress(record.id, "extrema", members);
    if (address === asked && found) return scene?.setExtrema(found.extrema);
    asked = address;
    scene?.setExtrema([]);
    fill(extrema, el("p", { class: "quiet" }, "Seeking …"));
    try {
      const answer = await askJson(address);
      if (asked !== address) return undefined;
      found = answer;
      scene?.setExtrema(found.extrema);
      return extremaTable(extrema, found, mark);
    } catch (fault) {
      if (asked !== address) return undefined;
      asked = "";
      return showProblem(extrema, fault);
    }
  }

  function offer() {
    const { state, record } = context;
    const grid = gridMembers(false);
    takeAlong(take, record, [
      { product: "grid", members: grid, formats: ["npy", "npz", "png", "svg", "glb"], pictured: { "picture.title": record.name, "picture.theme": theme() }, only: { glb: surfaceMembers(state, false, false) } },
      ...(state.kinds === "none" ? [] : [{ product: "extrema", members: { kinds: state.kinds, most: state.most, ...treatmentMembers(state) }, formats: ["csv"], words: "the extrema" }]),
    ]);
  }

  const hand = el(
    "div",
    { class: "row hand" },
    button("First view", () => scene?.turntable.back()),
    button("Larger", () => scene?.turntable.scale(1.25)),
    button("Smaller", () => scene?.turntable.scale(0.8)),
    el("span", { class: "quiet" }, "Drag or arrow keys turn; the wheel with Control, or + and −, change the size."),
  );

  const element = el(
    "div",
    { class: "view" },
    el("div", { class: "view-head" }, title, controls),
    trouble,
    el("div", { class: "picture-part" }, caption, picture, hand, notes),
    el("div", { class: "side" }, el("section", { class: "side-part" }, sought, extrema)),
    take,
  );

  return {
    element,
    update(given, changed) {
      context = given;
      if (changed?.length && changed.every((name) => name === "turn" || name === "zoom")) {
        if (scene) orient(context.state);
        return;
      }
      drawControls(controls, context);
      extremaControls(sought, context.state);
      if (changed?.length && changed.every((name) => name === "kinds" || name === "most")) {
        loadExtrema(context);
        offer();
        return;
      }
      load();
    },
    leave() {
      abort?.abort();
      context = null;
      scene?.destroy();
      scene = null;
    },
  };
}

/** A surface; of the second one, below, it is no fault that the field may not reach so far: `none` tells. */
async function surfaceOf(record, members, below, signal) {
  try {
    const answer = await ask(productAddress(record.id, "grid", members, "glb"), { signal });
    return { glb: readGlb(await answer.arrayBuffer()), below };
  } catch (fault) {
    const [place] = fault.places ?? [];
    if (!below || fault.status !== 422 || !place?.pointer.startsWith("/surface/")) throw fault;
    return { glb: { indices: [] }, below, none: `no surface, the level ${place.reason}` };
  }
}

function drawControls(host, { state, record }) {
  const errors = hasSigma(record);
  const counted = COUNTS.filter(([name]) => name !== "sigmas" || errors);
  const most = { rms: 12, sigmas: 60 }[state.count_in];
  const words = { rms: "Level, rms deviations", sigmas: "Level, σ", value: `Level, ${unitText(record.unit)}` }[state.count_in];
  const change1 = (level) => change({ level });
  const slider = most
    ? el("input", { type: "range", min: 0.1, max: most, step: 0.1, ".value": String(state.level), "aria-label": words, onchange: (event) => change1(Number(event.target.value)) })
    : null;
  fill(
    host,
    field("Surface at", number(state.level, (level) => level !== null && change1(level), { required: true, "aria-label": words })),
    slider ? el("div", { class: "level" }, slider) : null,
    field("counted in", choice(counted, state.count_in, (count_in) => change({ count_in }))),
    tick(state.count_in === "rms" ? "and as far below" : "and at minus the level", state.below, (below) => change({ below })),
  );
}

function extremaControls(host, state) {
  fill(
    host,
    el("h2", {}, "Extrema"),
    el(
      "div",
      { class: "pair" },
      field("Mark", choice(KINDS, state.kinds, (kinds) => change({ kinds }))),
      field("at most", number(state.most, (value) => value && change({ most: Math.round(value) }), { min: 1, max: 200, step: 1 })),
    ),
  );
}

function extremaTable(host, found, mark) {
  const heads = ["", "x", "y", "z", "± Å", unitText(found.unit), "n"];
  const rows = found.extrema.map((one, place) =>
    el(
      "tr",
      { "data-place": place, onpointerenter: () => mark(place, false), onpointerleave: () => mark(null, false) },
      el("th", { scope: "row" }, el("button", { type: "button", class: "plain", "aria-label": `${one.kind} ${one.number}, mark it in the cell`, onfocus: () => mark(place, true), onblur: () => mark(null, false) }, String(one.number))),
      one.fractional.map((part) => el("td", {}, fixed(part, 4))),
      el("td", {}, short(one.largest_position_sigma, 2)),
      el("td", {}, inBrackets(one.value, one.sigma)),
      el("td", {}, String(one.multiplicity)),
    ),
  );
  fill(
    host,
    table(`${count(found.extrema.length)} of ${count(found.found)}, one of each set of n equivalents; fractional x, y, z`, heads, rows),
    el("details", { class: "remarks" }, el("summary", {}, "What to know"), el("ul", {}, [...found.applied, ...found.notes].map((line) => el("li", {}, line)))),
  );
}
