// The key that a service may ask for: held for this tab alone, and never in an address.

import { button, el, field } from "./dom.js";

const PLACE = "densityloom-key";
let asking = null;

export function heldKey() {
  return sessionStorage.getItem(PLACE) || "";
}

/**
 * Ask the reader for a key; several requests that are refused at once share one question.
 *
 * Resolves to whether there is a key to try.
 */
export function askForKey(reason, refused) {
  if (heldKey() && heldKey() !== refused) return Promise.resolve(true);
  asking ??= question(reason).finally(() => {
    asking = null;
  });
  return asking;
}

function question(reason) {
  return new Promise((resolve) => {
    const input = el("input", { type: "password", autocomplete: "off", spellcheck: "false", required: true });
    const dialog = el(
      "dialog",
      { class: "dialog", "aria-labelledby": "key-title" },
      el(
        "form",
        {
          method: "dialog",
          onsubmit: (event) => {
            event.preventDefault();
            sessionStorage.setItem(PLACE, input.value.trim());
            end(true);
          },
        },
        el("h2", { id: "key-title" }, "This service asks for a key"),
        el("p", {}, reason),
        field("Key", input, "Kept until this tab is closed, and sent to this service alone."),
        el("p", { class: "row" }, el("button", { type: "submit", class: "main" }, "Go on with this key"), button("Not now", () => end(false))),
      ),
    );
    function end(found) {
      dialog.close();
      dialog.remove();
      resolve(found);
    }
    dialog.addEventListener("cancel", () => end(false));
    document.body.append(dialog);
    dialog.showModal();
    input.focus();
  });
}
