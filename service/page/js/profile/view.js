// A profile: the curve with its σ band, layers, integrals.

import { announce, choice, el, field, fill, number, table, tick } from "../dom.js";
import { vector } from "../lattice.js";
import { short, unitText } from "../numbers.js";
import { clearProblem, showProblem } from "../problem.js";
import { askJson, productAddress } from "../service.js";
import { change } from "../state.js";
import { takeAlong } from "../take.js";
import { onTheme, theme } from "../theme.js";
import { treatmentMembers, wantsSigma } from "../treatment.js";
import { Chart } from "./chart.js";
import { Intervals } from "./intervals.js";
import { layersTable } from "./layers.js";
import { lengthOf, lineMembers, lineWords, normalOf } from "./line.js";

/** Samples to the finest spacing, and bounds of their number. */
const FINENESS = 8;
const [FEWEST, MOST] = [321, 4001];

export function profileView() {
  const controls = el("div", { class: "controls" });
  const trouble = el("div", { "aria-live": "polite" });
  const title = el("h1", {});
  const picture = el("div", { class: "curve" });
  const values = el("div", {});
  const layers = el("section", { class: "side-part" });
  const integrals = el("section", { class: "side-part" });
  const notes = el("div", {});
  const take = el("section", { class: "take" });
  let chart = null;
  let last = null;
  let turn = 0;

  const intervals = new Intervals(integrals, {
    highlight: (place) => chart?.highlightInterval(place),
    changed: (text) => change({ intervals: text }),
  });

  function draw() {
    if (!last) return;
    chart?.destroy();
    const { answer, found, context } = last;
    chart = new Chart(picture, {
      answer,
      layers: found?.layers ?? [],
      marks: context.state.marks,
      words: lineWords(context.state, context.record),
      onRegion: (from, to) => intervals.add(from, to),
      onLayer: (place) => mark(place, false),
      intervals: intervals.list,
    });
  }
  onTheme(() => draw());

  /** Mark a layer on the curve and in the table. */
  function mark(place, move) {
    chart?.highlightLayer(place);
    for (const row of layers.querySelectorAll("tr[data-place]")) row.classList.toggle("marked", Number(row.dataset.place) === place);
    if (move && place !== null && last?.found) announce(`Layer ${last.found.layers[place].layer} at ${short(last.found.layers[place].position)} ångström`);
  }

  async function load(context) {
    const { state, record, report } = context;
    turn += 1;
    const mine = turn;
    fill(title, lineWords(state, record));
    let line;
    try {
      line = lineMembers(state, record);
    } catch (fault) {
      return showProblem(trouble, fault);
    }
    picture.setAttribute("aria-busy", "true");
    const members = { ...line, ...treatmentMembers(state) };
    const withErrors = wantsSigma(state, record) ? { uncertainty: true } : {};
    const samples = samplesFor(lengthOf(line, context), state.d_min ?? record.d_min);
    const profile = { ...members, samples, ...withErrors };
    intervals.setContext(context, members);
    const offer = (layered) =>
      takeAlong(take, record, [
        { product: "profile", members: profile, formats: ["npy", "npz", "csv", "png", "svg"], pictured: { "picture.title": record.name, "picture.theme": theme(), "picture.mark_layers": layered || null }, only: { npy: { uncertainty: null } } },
        ...(layered ? [{ product: "layers", members, formats: ["csv"], words: "the layers" }] : []),
      ]);
    offer(false);
    try {
      const [answer, found] = await Promise.all([
        askJson(productAddress(record.id, "profile", profile, "json")),
        // Layers are of a density alone; where they cannot be had, the curve can.
        state.field === "density" ? askJson(productAddress(record.id, "layers", members)).catch((fault) => ({ fault })) : null,
      ]);
      if (mine !== turn) return;
      clearProblem(trouble);
      picture.classList.remove("stale");
      if (answer.components.length || typeof answer.values[0] !== "number") {
        throw Object.assign(new Error("The density is complex, and a curve shows real values: take the numbers along as npy or npz."), { title: "There is no one curve to draw" });
      }
      last = { answer, found: found?.fault ? null : found, context };
      report({ ...answer.summary, unit: answer.unit });
      intervals.show(state.intervals, line);
      draw();
      layersTable(layers, found, answer.unit, mark);
      fill(values, valuesTable(answer));
      fill(notes, remarks(answer));
      offer(Boolean(last.found));
      announce(`Profile ${lineWords(state, record)}: from ${short(answer.summary.minimum)} to ${short(answer.summary.maximum)} ${unitText(answer.unit)}`);
    } catch (fault) {
      if (mine !== turn) return;
      showProblem(trouble, fault);
      // What is still drawn is not what was asked for.
      picture.classList.add("stale");
      report(null);
    } finally {
      if (mine === turn) picture.removeAttribute("aria-busy");
    }
  }

  const element = el(
    "div",
    { class: "view" },
    el("div", { class: "view-head" }, title, controls),
    trouble,
    el("div", { class: "picture-part" }, picture, el("details", {}, el("summary", {}, "The curve as a table"), values), notes),
    el("div", { class: "side" }, integrals, layers),
    take,
  );

  return {
    element,
    update(context, changed) {
      if (changed && changed.every((name) => name === "intervals")) {
        intervals.show(context.state.intervals, lineMembers(context.state, context.record));
        chart?.setIntervals(intervals.list);
        return;
      }
      if (changed && changed.every((name) => name === "marks")) {
        if (last) last.context = context;
        draw();
        return;
      }
      drawControls(controls, context);
      load(context);
    },
    leave() {
      turn += 1;
      chart?.destroy();
      chart = null;
      last = null;
    },
  };
}

function drawControls(host, { state, record }) {
  const size = record.dimension;
  const lines = [
    ["normal", size === 1 ? "through the stack" : "normal to planes, averaged over them"],
    size === 1 ? null : ["axis", "along a direction of the cell"],
    ["points", "between two points"],
  ].filter(Boolean);
  const typed = (words, member, whole, help) =>
    field(
      words,
      el("input", {
        type: "text",
        inputmode: "text",
        autocomplete: "off",
        class: "indices",
        ".value": member === "normal" ? normalOf(state, record).join(", ") : String(state[member]).split(",").slice(0, size).join(", "),
        onchange: (event) => {
          const found = vector(event.target.value, size, whole);
          event.target.setCustomValidity(found ? "" : `Give ${size} ${whole ? "whole " : ""}number${size > 1 ? "s, apart by commas" : ""}${whole ? ", not all 0" : ""}.`);
          if (!event.target.reportValidity()) return;
          change({ [member]: found.join(","), intervals: "" });
        },
      }),
      help,
    );
  fill(
    host,
    field("Direction", choice(lines, state.line, (line) => change({ line, intervals: "" }))),
    state.line === "normal" && size > 1 ? typed("Planes, indices", "normal", true) : null,
    state.line === "axis" ? typed("Direction [uvw]", "along", true) : null,
    state.line === "points" ? [typed("From, fractional", "from", false), typed("To", "to", false)] : null,
    state.field === "density" ? tick("mark layers", state.marks, (marks) => change({ marks })) : null,
  );
}

function samplesFor(length, d_min) {
  return Math.min(MOST, Math.max(FEWEST, d_min ? Math.ceil((FINENESS * length) / d_min) : 0));
}

function valuesTable(answer) {
  const axis = answer.axes[0];
  const every = Math.max(1, Math.ceil(answer.values.length / 121));
  const rows = [];
  for (let i = 0; i < answer.values.length; i += every) {
    rows.push(
      el("tr", {}, el("td", {}, short(axis.start + i * axis.step, 5)), el("td", {}, short(answer.values[i])), answer.uncertainty ? el("td", {}, short(answer.uncertainty[i], 2)) : null),
    );
  }
  const heads = ["position, Å", `value, ${unitText(answer.unit)}`, ...(answer.uncertainty ? ["σ"] : [])];
  return table(every > 1 ? `Every ${every}th sample; all are in the CSV` : "Samples", heads, rows);
}

export function remarks(answer) {
  const lines = [...answer.applied, ...answer.notes];
  const errors = answer.summary?.uncertainty;
  return el(
    "details",
    { class: "remarks" },
    el("summary", {}, `How it was made, and what to know (${lines.length})`),
    el("ul", {}, lines.map((line) => el("li", {}, line))),
    errors
      ? [
          el("p", {}, `In σ: ${errors.contains.join("; ")}.`),
          el("p", {}, `Not in σ: ${errors.omits.join("; ")}.`),
        ]
      : null,
  );
}
