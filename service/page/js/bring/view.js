// The first view: bring a file or a table, open what is kept, or try a demonstration.

import { announce, button, el, field, fill } from "../dom.js";
import { clearProblem, showProblem } from "../problem.js";
import { aboutForm } from "./form.js";
import { demos } from "./demos.js";
import { keepDocument, keepFile, keepParts } from "./send.js";
import { shelf } from "./shelf.js";
import { readTable } from "./table.js";

const LARGEST_TABLE = 64 * 2 ** 20;

/** `opened(record)` is called with a set that was brought, `open(id)` with one that is kept. */
export function bringView(opened, open) {
  const trouble = el("div", { "aria-live": "polite" });
  const about = el("div", { class: "card", hidden: true });
  const kept = shelf(open);
  const doors = el("div", { class: "doors" });

  const file = el("input", {
    type: "file",
    class: "file",
    "aria-label": "A file of reflections or coefficients",
    onchange: () => {
      if (file.files.length) take(file.files[0]);
    },
  });
  const text = el("textarea", {
    name: "table",
    rows: 7,
    spellcheck: "false",
    autocomplete: "off",
    placeholder: "l  amplitude  phase_deg  sigma\n1  7.28  0    0.15\n2  6.75  180  0.14",
  });
  const drop = el(
    "div",
    { class: "drop" },
    el("p", { class: "lead" }, "Drop a file here"),
    el("p", {}, "or choose one:"),
    file,
    el("p", { class: "quiet" }, "CIF, a table as text (CSV, tabs, blanks), npz, or a request of the API as JSON."),
  );
  for (const kind of ["dragenter", "dragover"]) {
    drop.addEventListener(kind, (event) => {
      event.preventDefault();
      drop.classList.add("over");
    });
  }
  for (const kind of ["dragleave", "drop"]) drop.addEventListener(kind, () => drop.classList.remove("over"));
  drop.addEventListener("drop", (event) => {
    event.preventDefault();
    const dropped = event.dataTransfer.files[0];
    const words = event.dataTransfer.getData("text/plain");
    if (dropped) take(dropped);
    else if (words) {
      text.value = words;
      takeText(words);
    }
  });

  async function take(chosen) {
    clearProblem(trouble);
    drop.setAttribute("aria-busy", "true");
    try {
      await sort(chosen);
    } catch (fault) {
      showProblem(trouble, fault);
    } finally {
      drop.removeAttribute("aria-busy");
      // The same file may be chosen again once it is mended.
      file.value = "";
    }
  }

  /** By its content, and where that is binary by its name. */
  async function sort(chosen) {
    const head = new Uint8Array(await chosen.slice(0, 4).arrayBuffer());
    const zip = head[0] === 0x50 && head[1] === 0x4b;
    if (zip) return ask({ kind: "archive", name: stem(chosen.name), file: chosen });
    if (chosen.size > LARGEST_TABLE) return ask({ kind: "file", name: stem(chosen.name), file: chosen });
    const content = await chosen.text();
    if (/^\s*\{/.test(content)) return takeJson(content, stem(chosen.name));
    if (/^\s*(#.*\s+)*data_/i.test(content) || /\.(m?m?cif|hkl_cif)$/i.test(chosen.name)) {
      try {
        return opened(await keepFile(chosen, stem(chosen.name)));
      } catch (fault) {
        // The file does not say everything: the form asks, and shows what was missing.
        return ask({ kind: "file", name: stem(chosen.name), file: chosen }, fault);
      }
    }
    return ask({ kind: "table", name: stem(chosen.name), table: readTable(content) });
  }

  async function takeJson(content, name) {
    let document;
    try {
      document = JSON.parse(content);
    } catch (fault) {
      throw Object.assign(new Error(`The text begins like JSON, but is none: ${fault.message}`), { title: "The text cannot be read" });
    }
    if (!document.set) {
      throw Object.assign(new Error("The JSON holds no set: bring a document with the member set, as a request of the API has it."), {
        title: "There is no set in it",
      });
    }
    return opened(await keepDocument(document, name));
  }

  async function takeText(content) {
    clearProblem(trouble);
    try {
      if (/^\s*\{/.test(content)) await takeJson(content, "");
      else ask({ kind: "table", name: "", table: readTable(content) });
    } catch (fault) {
      showProblem(trouble, fault);
    }
  }

  function ask(source, fault) {
    const form = aboutForm(source, send, () => show(false));
    fill(about, form);
    show(true);
    if (fault) showProblem(form.querySelector("[aria-live]"), fault);
    about.scrollIntoView({ block: "start" });
    form.querySelector("input, select")?.focus({ preventScroll: true });
    announce("Say what the table does not say itself.");
  }

  async function send(assemble, place, pressed) {
    clearProblem(place);
    pressed.disabled = true;
    try {
      const record = await keepParts(assemble());
      show(false);
      opened(record);
    } catch (fault) {
      showProblem(place, fault);
    } finally {
      pressed.disabled = false;
    }
  }

  function show(form) {
    about.hidden = !form;
    doors.hidden = form;
  }

  fill(
    doors,
    el(
      "section",
      { class: "card bring", "aria-labelledby": "bring-title" },
      el("h2", { id: "bring-title" }, "Bring what you measured"),
      drop,
      field("Or paste a table", text, "With or without a header. A row is a reflection or an order; you say next what the columns are."),
      el("p", { class: "row" }, button("Go on with the table", () => takeText(text.value), { class: "main" })),
      trouble,
    ),
    kept.element,
    demos(opened, (fault) => showProblem(trouble, fault)),
  );
  const element = el(
    "div",
    { class: "bring-view" },
    el("h1", {}, "What density do these reflections stand for?"),
    el("p", { class: "lead" }, "Bring a table of indices, strengths, phases and errors; see first what it is worth, then the density along a line, on a plane and in the whole cell."),
    about,
    doors,
  );
  return {
    element,
    update() {
      kept.load();
    },
    leave() {},
  };
}

function stem(name) {
  return name.replace(/\.[^.]+$/, "").slice(0, 200);
}
