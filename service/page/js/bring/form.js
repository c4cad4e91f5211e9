// The small form: what a table or a file does not say itself.

import { choice, el, field, fill, table as tableOf } from "../dom.js";
import { count } from "../numbers.js";
import { vector } from "../lattice.js";
import { MEANINGS, complaints, dimensionOf, isRaw, toCsv } from "./table.js";

const LATTICES = [
  ["3", "a crystal: a, b, c, α, β, γ"],
  ["2", "a planar lattice: a, b, γ"],
  ["1", "a stack of layers: its period"],
];
const UNITS = ["e/Å³", "10⁻⁶ Å⁻²", "e/Å²", "arbitrary"];
const PARAMETERS = {
  3: [["a", "a, Å"], ["b", "b, Å"], ["c", "c, Å"], ["alpha", "α, °"], ["beta", "β, °"], ["gamma", "γ, °"]],
  2: [["a", "a, Å"], ["b", "b, Å"], ["gamma", "γ, °"]],
  1: [["period", "period, Å"]],
};

/**
 * A form about `source`: {kind: "table" | "file" | "archive", name, table?, file?}.
 *
 * `send(parts)` is called with {request, columns?, reflections?} once the reader has filled it in.
 */
export function aboutForm(source, send, cancel) {
  const meanings = source.table ? [...source.table.meanings] : [];
  let dimension = dimensionOf(meanings) || 3;
  const values = {};

  const cellHost = el("div", {});
  const lattice = el("div", {});
  const trouble = el("div", { "aria-live": "polite" });
  const name = el("input", { type: "text", maxlength: 200, autocomplete: "off", ".value": source.name });
  const unit = el("input", { type: "text", maxlength: 40, autocomplete: "off", list: "units", ".value": "arbitrary" });
  const mean = el("input", { type: "number", step: "any", autocomplete: "off", placeholder: "unknown" });
  const group = el("input", { type: "text", maxlength: 60, autocomplete: "off", placeholder: "taken as it is" });
  const full = el("input", { type: "checkbox", id: "columns-full" });
  const preparation = el("textarea", { rows: 3, spellcheck: "false", placeholder: '{"observed": "intensity", "scale": {"kind": "none"}}' });
  const optionalCell = source.kind === "file";

  function drawCell() {
    fill(
      lattice,
      field(
        "What was measured is",
        choice(LATTICES, String(dimension), (chosen) => {
          dimension = Number(chosen);
          drawCell();
        }),
      ),
    );
    fill(
      cellHost,
      el(
        "div",
        { class: "cell-fields" },
        PARAMETERS[dimension].map(([key, words]) =>
          field(
            words,
            el("input", {
              type: "number",
              step: "any",
              min: 0,
              name: key,
              required: !optionalCell,
              autocomplete: "off",
              ".value": values[key] ?? "",
              oninput: (event) => {
                values[key] = event.target.value;
              },
            }),
          ),
        ),
      ),
      optionalCell ? el("p", { class: "quiet" }, "Left empty, the cell of the file is taken.") : null,
    );
  }
  drawCell();

  const meaning = el(
    "fieldset",
    {},
    el("legend", {}, "The values are"),
    [
      ["structure_factor", "structure factors F(hkl) = ∫ρ exp(+2πi h·x) dV over one cell"],
      ["density_coefficient", "coefficients n of the density itself, n(r) = Σ n exp(+2πi h·x)"],
    ].map(([key, words]) =>
      el(
        "div",
        { class: "tick" },
        el("input", { type: "radio", name: "values", value: key, id: `values-${key}`, required: true, ".checked": source.kind === "file" && key === "structure_factor" }),
        el("label", { for: `values-${key}` }, words),
      ),
    ),
    el("p", { class: "quiet" }, "Taken the wrong way round, the density is the inverted structure; so it is never guessed."),
  );

  function assemble() {
    const chosen = new FormData(form).get("values");
    const set = { values: chosen, unit: unit.value.trim() || "arbitrary" };
    const given = PARAMETERS[dimension].filter(([key]) => values[key]);
    if (given.length) set.cell = Object.fromEntries(given.map(([key]) => [key, Number(values[key])]));
    if (mean.value.trim() !== "") set.mean = Number(mean.value);
    if (group.value.trim()) {
      const member = { 3: "space_group", 2: "plane_group", 1: "stack_group" }[dimension];
      const text = group.value.trim();
      const number = vector(text, 1, true);
      set.symmetry = { [member]: number && dimension > 1 ? number[0] : text, ...(full.checked ? { columns: "full" } : {}) };
    }
    if (preparation.value.trim()) {
      try {
        set.preparation = JSON.parse(preparation.value);
      } catch (fault) {
        const reason = `is not JSON (${fault.message})`;
        throw Object.assign(new Error(reason), { title: "The preparation cannot be read", places: [{ pointer: "preparation", reason, cure: "mend it, or leave it empty" }] });
      }
    }
    const request = { set };
    if (name.value.trim()) request.name = name.value.trim();
    if (source.kind !== "table") return { request, [source.kind === "archive" ? "columns" : "reflections"]: source.file };
    const found = complaints(source.table, meanings);
    if (found.length) throw Object.assign(new Error(found[0].reason), { title: "The table cannot be used as it stands", places: found });
    const part = new Blob([toCsv(source.table, meanings)], { type: "text/csv" });
    return { request, [isRaw(meanings) ? "reflections" : "columns"]: part, filename: `${source.name || "table"}.csv` };
  }

  const form = el(
    "form",
    {
      class: "about",
      onsubmit: async (event) => {
        event.preventDefault();
        await send(assemble, trouble, form.querySelector("button[type=submit]"));
      },
    },
    el("h2", {}, source.kind === "table" ? `About this table (${count(source.table.rows.length)} rows)` : `About ${source.name}`),
    source.table ? preview(source.table, meanings, () => {
      const found = dimensionOf(meanings);
      if (found && found !== dimension) {
        dimension = found;
        drawCell();
      }
    }) : null,
    field("Name", name),
    lattice,
    el("fieldset", {}, el("legend", {}, "Cell"), cellHost),
    meaning,
    el("div", { class: "pair" },
      field("Unit of the density", unit, "Say arbitrary where the scale is."),
      field("Zero term, F(000) or n₀", mean, "Where no row carries it."),
    ),
    el("datalist", { id: "units" }, UNITS.map((one) => el("option", { value: one }))),
    el(
      "details",
      {},
      el("summary", {}, "Symmetry, preparation"),
      field("Group", group, "Number or symbol of the space or plane group; of a stack 1, -1 or m. It expands an asymmetric set with the right phases."),
      el("div", { class: "tick" }, full, el("label", { for: "columns-full" }, "the columns are the full set already")),
      source.kind === "archive" ? null : field("Preparation of raw intensities, as JSON", preparation, "Corrections, scale, which phases: the member set.preparation of the API."),
    ),
    trouble,
    el("p", { class: "row" }, el("button", { type: "submit", class: "main" }, "Keep it and look"), el("button", { type: "button", onclick: cancel }, "Back")),
  );
  return form;
}

/** The first rows, each column under a choice of what it is. */
function preview(table, meanings, changed) {
  const heads = table.heads.map((head, place) =>
    el(
      "span",
      {},
      el("span", { class: "head-name" }, head),
      choice(MEANINGS, meanings[place], (chosen) => {
        meanings[place] = chosen;
        changed();
      }, { "aria-label": `What ${head} is` }),
    ),
  );
  const rows = table.rows.slice(0, 4).map((row) => el("tr", {}, row.map((text) => el("td", {}, text))));
  return tableOf("The first rows, and what the columns are", heads, rows, { class: "preview" });
}
