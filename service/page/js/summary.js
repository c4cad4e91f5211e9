// What a set is worth: warnings first, then its facts.

import { button, el, fill, table } from "./dom.js";
import { KINDS } from "./bring/shelf.js";
import { remove } from "./bring/send.js";
import { bytes, count, fixed, short, unitText } from "./numbers.js";
import { showProblem } from "./problem.js";
import { askJson, productAddress } from "./service.js";
import { spark } from "./spark.js";
import { DEFAULTS, change, note, now } from "./state.js";
import { takeAlong } from "./take.js";
import { onTheme } from "./theme.js";

let redraw = () => {};

export function summaryView() {
  onTheme(() => redraw());
  const element = el("div", { class: "summary-view" });
  return {
    element,
    update({ record, report }) {
      report(null);
      fill(element, content(record));
    },
    leave() {},
  };
}

function content(record) {
  const { summary } = record;
  const take = el("section", { class: "take" });
  takeAlong(take, record, [{ product: "statistics", members: {}, formats: ["json"], report: true, words: "the moments" }]);
  return [
    el("div", { class: "view-head" }, el("h1", {}, record.name), nextSteps(record)),
    warnings(summary.warnings),
    el(
      "div",
      { class: "halves" },
      facts(record),
      el("div", {}, glance(record), columnsNote(record), summary.history.length ? history(summary.history) : null),
    ),
    summary.inspection ? inspection(summary.inspection) : null,
    take,
    removal(record),
  ];
}

function nextSteps(record) {
  const views = [
    ["profile", "See its profile"],
    record.dimension > 1 ? ["slice", record.dimension === 2 ? "See the plane" : "See a slice"] : null,
    record.dimension > 2 ? ["cell", "See the whole cell"] : null,
  ];
  return el("div", { class: "row" }, views.filter(Boolean).map(([view, words], place) => button(words, () => change({ view }), place ? {} : { class: "main" })));
}

/** The shape of the density before anything is chosen: through the stack, or averaged over planes. */
function glance(record) {
  const normal = { 1: [1], 2: [1, 0], 3: [0, 0, 1] }[record.dimension];
  const members = { normal_to: normal, "average.kind": record.dimension > 1 ? "lateral" : null, samples: 241 };
  const canvas = el("canvas", { class: "glance", "aria-hidden": "true" });
  const words = el("p", { class: "quiet" }, "…");
  const section = el("section", {}, el("h2", {}, "At a glance"), canvas, words);
  askJson(productAddress(record.id, "profile", members, "json")).then(
    (answer) => {
      if (typeof answer.values[0] !== "number") return section.remove();
      const { minimum, maximum } = answer.summary;
      const [axis] = answer.axes;
      const line = record.dimension === 1 ? "Through one period" : `Averaged over the planes (${normal.join(" ")}), along their normal`;
      fill(words, `${line}, ${short(axis.step * (axis.count - 1))} Å: from ${short(minimum)} to ${short(maximum)} ${unitText(answer.unit)}.`);
      if (record.dimension === 3) startAtTheDensest(record, answer.values);
      const draw = () => spark(canvas, answer.values);
      redraw = draw;
      return new ResizeObserver(draw).observe(canvas);
    },
    // Without phases there is nothing to glance at, and the warnings say so.
    () => section.remove(),
  );
  return section;
}

/** Nobody has chosen a height yet: the first slice shall go through what is there. */
function startAtTheDensest(record, values) {
  const { set, cut, axes, height } = now();
  if (set !== record.id || cut !== DEFAULTS.cut || axes !== DEFAULTS.axes || height !== DEFAULTS.height) return;
  const place = values.indexOf(Math.max(...values)) / (values.length - 1);
  note({ height: Math.round(200 * place) / 200 });
}

function warnings(texts) {
  return el(
    "section",
    { class: texts.length ? "warnings" : "warnings none", "aria-labelledby": "warnings" },
    el("h2", { id: "warnings" }, texts.length ? "Know before you look" : "Nothing to warn of"),
    texts.length ? el("ul", {}, texts.map((text) => el("li", {}, text))) : el("p", {}, "Phases and errors are there. Whether the phases are right, no table tells."),
  );
}

function facts(record) {
  const { summary } = record;
  const { cell, coefficients, coverage } = summary;
  const measure = { 1: "period", 2: "area", 3: "volume" }[record.dimension];
  const power = { 1: "Å", 2: "Å²", 3: "Å³" }[record.dimension];
  const names = ["a", "b", "c"];
  const rows = [
    ["kind", KINDS[record.dimension]],
    record.dimension > 1 ? ["cell", `${cell.lengths.map((length, i) => `${names[i]} ${short(length, 6)}`).join(", ")} Å`] : null,
    cell.angles.length ? ["angles", cell.angles.length === 1 ? `γ ${short(cell.angles[0], 6)}°` : cell.angles.map((angle, i) => `${"αβγ"[i]} ${short(angle, 6)}°`).join(", ")] : null,
    [measure, `${short(cell.volume, 6)} ${power}`],
    ["symmetry", summary.group ?? "none applied: the set is taken as it is"],
    ["coefficients", `${count(record.rows)} rows brought, ${count(coefficients.held)} held after expansion`],
    ["without phase", count(coefficients.without_phase)],
    ["zero term", coefficients.zero_term],
    record.d_min === null ? null : ["resolution", `${short(record.d_max, 4)} to ${short(record.d_min, 4)} Å`],
    coverage ? ["completeness", `${count(coverage.present)} of ${count(coverage.possible)} possible with a phase, ${fixed(100 * coverage.fraction, 1)} %`] : null,
    ["unit of the density", unitText(record.unit)],
    ["density", summary.density],
    record.file ? ["file", record.file] : null,
    record.tags.length ? ["tags", record.tags.join(", ")] : null,
    ["kept", `${record.created.replace("T", " ").replace("Z", " UTC")}, ${bytes(record.bytes)}`],
  ].filter(Boolean);
  return table("The set", ["", ""], rows.map(([name, value]) => el("tr", {}, el("th", { scope: "row" }, name), el("td", {}, value))), { class: "facts" });
}

function columnsNote(record) {
  const words = { sigma: "standard uncertainties of the amplitudes", phase_sigma: "standard uncertainties of the phases", merit: "figures of merit of the phases" };
  const has = record.summary.columns;
  return el(
    "section",
    {},
    el("h2", {}, "What is known of its errors"),
    el("ul", { class: "known" }, Object.entries(words).map(([name, text]) => el("li", { class: has.includes(name) ? "yes" : "no" }, `${has.includes(name) ? "There are" : "No"} ${text}.`))),
  );
}

function history(lines) {
  return el("section", {}, el("h2", {}, "What was done to the measurements"), el("ol", {}, lines.map((line) => el("li", {}, line))));
}

function inspection(found) {
  const parts = [el("h2", {}, "What the file is worth")];
  if (found.statistics) parts.push(el("p", {}, found.statistics));
  const shells = found.agreement_shells ?? [];
  if (shells.length) {
    parts.push(
      table(
        "Agreement of repeated measurements, by shells of resolution",
        ["d, Å", "unique", "redundancy", "R_merge", "R_pim", "CC½", "mean I/σ"],
        shells.map((shell) =>
          el(
            "tr",
            {},
            [
              `${short(shell.d_max, 3)} to ${short(shell.d_min, 3)}`,
              count(shell.unique),
              fixed(shell.redundancy, 1),
              fixed(shell.r_merge, 3),
              fixed(shell.r_pim, 3),
              fixed(shell.cc_half, 3),
              fixed(shell.mean_signal, 1),
            ].map((text) => el("td", {}, text)),
          ),
        ),
      ),
    );
  }
  return el("section", {}, parts);
}

function removal(record) {
  const trouble = el("div", { "aria-live": "polite" });
  const host = el("div", { class: "row" });
  const ask = () =>
    fill(
      host,
      el("span", {}, "The set is deleted for everyone who uses this service."),
      button("Delete it", async () => {
        try {
          await remove(record.id);
          change({ set: "", view: "bring" });
        } catch (fault) {
          showProblem(trouble, fault);
        }
      }, { class: "danger" }),
      button("Keep it", rest),
    );
  function rest() {
    fill(host, button("Delete this set …", ask));
  }
  rest();
  return el("section", { class: "removal" }, host, trouble);
}
