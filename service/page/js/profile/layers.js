// The layers of a profile as a table, which marks them on the curve.

import { el, fill, table } from "../dom.js";
import { inBrackets, unitText } from "../numbers.js";

/** A head of a column, its unit on a line of its own. */
function headOf(words, unit) {
  return [words, el("small", { class: "unit" }, unitText(unit))];
}

/** `mark(place, move)` is called with a layer's place in the list, or null. */
export function layersTable(host, found, unit, mark) {
  if (!found) return fill(host);
  if (found.fault) return fill(host, el("h2", {}, "Layers"), el("p", { class: "quiet" }, found.fault.message));
  if (!found.layers.length) return fill(host, el("h2", {}, "Layers"), el("p", { class: "quiet" }, "The profile has no maximum between two minima."));
  const heads = ["", headOf("position", "Å"), headOf("width", "Å"), headOf("height", unit), headOf("area", found.area_unit)];
  const rows = found.layers.map((layer, place) =>
    el(
      "tr",
      {
        "data-place": place,
        onpointerenter: () => mark(place, false),
        onpointerleave: () => mark(null, false),
      },
      el("th", { scope: "row" }, el("button", { type: "button", class: "plain", onfocus: () => mark(place, true), onblur: () => mark(null, false), "aria-label": `Layer ${layer.layer}, mark it on the curve` }, String(layer.layer))),
      el("td", {}, inBrackets(layer.position, layer.position_sigma)),
      el("td", {}, inBrackets(layer.width, layer.width_sigma)),
      el("td", {}, inBrackets(layer.height, layer.height_sigma)),
      el("td", {}, inBrackets(layer.area, layer.area_sigma)),
    ),
  );
  const apart = found.spacings.map((one) =>
    el("tr", {}, el("td", {}, `${one.first} to ${one.second}${one.periods ? ", next period" : ""}`), el("td", {}, inBrackets(one.distance, one.sigma))),
  );
  return fill(
    host,
    el("h2", {}, "Layers"),
    table("Each between two minima of the profile; standard uncertainty of the last digits in brackets", heads, rows),
    apart.length > 1 ? el("details", {}, el("summary", {}, "Distances"), table("Distances between layers", ["layers", "distance, Å"], apart)) : null,
  );
}
