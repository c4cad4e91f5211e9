// The page: which view is shown, of which set, and what it was made from.

import { announce, choice, el, fill } from "./dom.js";
import { bringView } from "./bring/view.js";
import { lookAt } from "./bring/send.js";
import { Lattice } from "./lattice.js";
import { showProblem } from "./problem.js";
import { provenance, STATEMENT } from "./provenance.js";
import * as state from "./state.js";
import { summaryView } from "./summary.js";
import * as theme from "./theme.js";
import { treatmentPanel } from "./treatment.js";

const VIEWS = [
  ["bring", "Sets", 0],
  ["summary", "Summary", 1],
  ["profile", "Profile", 1],
  ["slice", "Slice", 2],
  ["cell", "Whole cell", 3],
];
/** Members of the state that belong to one view: others need not hear of them. */
const MAKERS = {
  bring: async () => bringView(opened, (id) => state.change({ ...afresh(), set: id, view: "summary" })),
  summary: async () => summaryView(),
  profile: async () => (await import("./profile/view.js")).profileView(),
  slice: async () => (await import("./slice/view.js")).sliceView(),
  cell: async () => (await import("./cell/view.js")).cellView(),
};

const place = (id) => document.getElementById(id);
const views = new Map();
const records = new Map();
let shown = "";
let shownSet = "";
let turn = 0;

/** All that belongs to one set goes back to the defaults when another is opened. */
function afresh() {
  return { ...state.DEFAULTS };
}

function opened(record) {
  records.set(record.id, record);
  state.change({ ...afresh(), set: record.id, view: "summary" });
}

async function recordOf(id) {
  if (!records.has(id)) records.set(id, await lookAt(id));
  return records.get(id);
}

/** The view that can be shown: what a set has too few dimensions for is its profile. */
function possible(view, record) {
  const known = VIEWS.find(([name]) => name === view);
  if (!known || view === "bring") return "bring";
  return record && record.dimension >= known[2] ? view : record ? "profile" : "bring";
}

async function update(changed) {
  turn += 1;
  const mine = turn;
  const now = state.now();
  let record = null;
  if (now.set) {
    try {
      record = await recordOf(now.set);
    } catch (fault) {
      if (mine === turn) await missing(fault);
      return;
    }
    if (mine !== turn) return;
  }
  const name = possible(now.view, record);
  navigation(name, record);
  const fresh = name !== shown || now.set !== shownSet;
  fill(place("trouble"));
  document.title = record && name !== "bring" ? `${record.name} – densityloom` : "densityloom";
  document.body.dataset.view = name;
  if (!views.has(name)) {
    const made = await MAKERS[name]();
    if (mine !== turn && views.has(name)) return;
    views.set(name, made);
  }
  if (mine !== turn) return;
  const view = views.get(name);
  if (fresh) {
    if (shown && views.has(shown)) views.get(shown).leave();
    fill(place("view"), view.element);
    shown = name;
    shownSet = now.set;
  }
  const lattice = record ? new Lattice(record.summary.cell.vectors) : null;
  const withStrip = record && name !== "bring";
  place("strip").hidden = !withStrip;
  const treated = withStrip && name !== "summary";
  place("treatment").hidden = !treated;
  if (withStrip && fresh) provenance(place("strip"), now, record, null);
  if (treated) {
    const open = place("treatment").querySelector("details")?.open;
    treatmentPanel(place("treatment-fields"), now, record);
    if (open !== undefined) place("treatment").querySelector("details").open = open;
  }
  view.update(
    {
      state: now,
      record,
      lattice,
      report: (made) => {
        if (mine === turn || shown === name) provenance(place("strip"), now, record, made);
      },
    },
    fresh ? null : changed,
  );
  if (fresh && changed) {
    const heading = place("view").querySelector("h1");
    heading?.setAttribute("tabindex", "-1");
    heading?.focus({ preventScroll: true });
    scrollTo({ top: 0 });
    announce(`${VIEWS.find(([one]) => one === name)[1]}${record && name !== "bring" ? ` of ${record.name}` : ""}`);
  }
}

async function missing(fault) {
  state.now().set = "";
  state.now().view = "bring";
  await update(null);
  showProblem(place("trouble"), fault);
}

function navigation(current, record) {
  const reachable = VIEWS.filter(([name, , size]) => name === "bring" || (record && record.dimension >= size));
  fill(
    place("views"),
    reachable.map(([name, words]) => {
      const label = name === "slice" && record.dimension === 2 ? "Plane" : words;
      return el(
        "a",
        {
          href: `#${state.fragment({ ...state.now(), view: name })}`,
          "aria-current": name === current ? "page" : null,
          onclick: (event) => {
            if (event.ctrlKey || event.metaKey || event.shiftKey) return;
            event.preventDefault();
            state.change({ view: name });
          },
        },
        label,
      );
    }),
  );
}

function frame() {
  const colours = choice(
    [["system", "as the system"], ["light", "light"], ["dark", "dark"]],
    theme.chosen(),
    (name) => theme.choose(name),
    { id: "colours" },
  );
  fill(place("colours-place"), el("label", { for: "colours" }, "Colours"), colours);
  place("statement").textContent = STATEMENT;
  // On a narrow screen the treatment is folded, so that the picture comes first.
  place("treatment").querySelector("details").open = matchMedia("(min-width: 72rem)").matches;
}

theme.begin();
state.begin();
frame();
state.onChange((changed) => update(changed));
update(null);
