// The list of sets that the service keeps, with a search.

import { announce, button, el, field, fill } from "../dom.js";
import { count, short } from "../numbers.js";
import { showProblem } from "../problem.js";
import { listSets } from "./send.js";

export const KINDS = { 1: "layer stack", 2: "planar lattice", 3: "crystal" };

export function shelf(open) {
  const list = el("ul", { class: "sets" });
  const more = el("p", {});
  const trouble = el("div", { "aria-live": "polite" });
  let asked = 0;
  let waiting = 0;

  async function load(after = null) {
    asked += 1;
    const turn = asked;
    try {
      const found = await listSets(search.value.trim(), after);
      if (turn !== asked) return;
      fill(trouble);
      const rows = found.sets.map((record) => row(record, open));
      if (after === null) fill(list, rows);
      else list.append(...rows);
      fill(
        more,
        found.total === 0 ? (search.value ? "No set is called so." : "Nothing is kept here yet.") : `${count(list.children.length)} of ${count(found.total)}`,
        found.next === null ? null : [" ", button("Show more", () => load(found.next))],
      );
      if (search.value) announce(`${found.total} sets found`);
    } catch (fault) {
      if (turn === asked) showProblem(trouble, fault);
    }
  }

  const search = el("input", {
    type: "search",
    autocomplete: "off",
    placeholder: "name, file or id",
    oninput: () => {
      clearTimeout(waiting);
      waiting = setTimeout(load, 180);
    },
  });
  const element = el("section", { class: "card", "aria-labelledby": "kept" }, el("h2", { id: "kept" }, "Open what is kept"), field("Search", search), trouble, list, more);
  return { element, load: () => load() };
}

function row(record, open) {
  const facts = [
    KINDS[record.dimension],
    `${count(record.coefficients)} coefficients`,
    record.d_min === null ? "" : `to ${short(record.d_min, 3)} Å`,
    record.unit === "arbitrary" ? "arbitrary scale" : record.unit,
    record.created.slice(0, 10),
    ...record.tags,
  ];
  return el(
    "li",
    {},
    el("button", { type: "button", class: "set", onclick: () => open(record.id) }, el("span", { class: "set-name" }, record.name), el("span", { class: "quiet" }, facts.filter(Boolean).join(" · "))),
  );
}
