// Demonstrations: invented sets that come with the page.

import { el } from "../dom.js";
import { Problem } from "../service.js";
import { keepDocument } from "./send.js";

const DEMOS = [
  ["stack", "A stack of layers", "a coating of two sheets in a period of 61.2 Å, thirteen orders with their errors"],
  ["planar", "A planar lattice", "two kinds of rods on an oblique lattice"],
  ["crystal", "A crystal", "molecules in an oblique cell with a screw axis; errors and figures of merit"],
];

export function demos(opened, failed) {
  return el(
    "section",
    { class: "card", "aria-labelledby": "demos" },
    el("h2", { id: "demos" }, "Or try an invented set"),
    el("p", { class: "quiet" }, "None of these substances exists."),
    el(
      "ul",
      { class: "sets" },
      DEMOS.map(([name, title, words]) =>
        el(
          "li",
          {},
          el(
            "button",
            {
              type: "button",
              class: "set",
              "data-demo": name,
              onclick: async (event) => {
                const pressed = event.currentTarget;
                pressed.disabled = true;
                try {
                  opened(await load(name));
                } catch (fault) {
                  failed(fault);
                } finally {
                  pressed.disabled = false;
                }
              },
            },
            el("span", { class: "set-name" }, title),
            el("span", { class: "quiet" }, words),
          ),
        ),
      ),
    ),
  );
}

async function load(name) {
  const answer = await fetch(new URL(`../../demos/${name}.json`, import.meta.url));
  if (!answer.ok) throw new Problem(answer.status, { title: "The demonstration is not there" });
  return keepDocument(await answer.json());
}
