// Problems in words: what is wrong, where, and how to mend it.

import { el, fill } from "./dom.js";

/** Show a problem in a place of its own; the place is a live region. */
export function showProblem(place, fault) {
  const places = (fault.places || []).filter((one) => one.reason);
  const detail = el("p", { class: "detail" }, fault.message);
  const listed = places.map((one) =>
    el("li", {}, el("span", { class: "place", title: one.pointer }, placeWords(one.pointer)), ` ${reasonWords(one.reason)}. `, el("span", { class: "cure" }, sentence(one.cure))),
  );
  fill(
    place,
    el(
      "div",
      { class: "problem", role: "alert" },
      el("strong", {}, fault.title || "That did not work"),
      // One place: the detail says the same in one line.
      places.length ? el("ul", {}, listed) : detail,
      advice(fault),
    ),
  );
}

export function clearProblem(place) {
  place.replaceChildren();
}

/** A JSON pointer into the request in words: /set/amplitude/1 is the amplitude of row 2. */
function placeWords(pointer) {
  const parts = (pointer ?? "").split("/").filter(Boolean);
  if (!(pointer ?? "").startsWith("/")) return pointer || "The request:";
  if (parts[0] === "set" && parts.length > 1) parts.shift();
  const words = parts.map((part) => part.replaceAll("~1", "/").replaceAll("~0", "~"));
  const last = words.at(-1);
  if (/^\d+$/.test(last) && words.length > 1) words[words.length - 1] = `row ${Number(last) + 1}`;
  return `${words.join(", ")}:`;
}

/** The reason; the row is named by its place, counted from 1 as in the table. */
function reasonWords(reason) {
  return reason.replace(/ \(row \d+, counted from 0\)/, "");
}

function sentence(text) {
  return text ? `${text[0].toUpperCase()}${text.slice(1)}.` : "";
}

function advice(fault) {
  const words = {
    0: null,
    401: "Without a key this service answers nothing more; reload the page to be asked again.",
    403: "The key is good, but not for this: ask who runs the service for one that is.",
    429: "Wait a little, then try again.",
    503: "All workers are busy: try again in a moment.",
  }[fault.status];
  return words ? el("p", { class: "cure" }, words) : null;
}
