// What a view gives to take along: its link, its numbers, and the request that makes them elsewhere.

import { announce, button, el, fill, fresh } from "./dom.js";
import { heldKey } from "./key.js";
import { showProblem } from "./problem.js";
import { ask, nested, productAddress } from "./service.js";
import { link } from "./state.js";

const WORDS = {
  npy: "npy",
  npz: "npz",
  csv: "CSV",
  json: "JSON",
  png: "PNG picture",
  svg: "SVG picture",
  glb: "glTF surface",
};

/**
 * The part below a view.
 *
 * `offers` is a list of {product, members, formats, pictured}: `members` of the request by their names with
 * dots, `pictured` further members for pictures. The first one is shown as request.
 */
export function takeAlong(host, record, offers) {
  const trouble = el("div", { "aria-live": "polite" });
  const [first] = offers;
  const shown = first.formats.includes("csv") ? "csv" : first.formats[0];
  fill(
    host,
    el("h2", {}, "Take it along"),
    el(
      "div",
      { class: "row" },
      button("Copy the link to this view", (event) => copy(link(), event.target)),
      offers.map((offer) =>
        offer.formats.map((format) =>
          button(WORDS[format] + (offer.words ? ` of ${offer.words}` : ""), (event) => download(event.target, record, offer, format, trouble), {
            "data-format": format,
            "data-product": offer.product,
          }),
        ),
      ),
    ),
    trouble,
    el(
      "details",
      {},
      el("summary", {}, "The same as a request, for a pipeline"),
      code("With curl", curl(record, first, shown)),
      code("With Python", python(record, first)),
    ),
  );
}

function code(words, text) {
  const id = fresh("code");
  const block = el("pre", { tabindex: 0, "aria-labelledby": id }, text);
  return el("div", { class: "code" }, el("div", { class: "row" }, el("h3", { id }, words), button("Copy", (event) => copy(text, event.target))), block);
}

async function copy(text, pressed) {
  const before = pressed.dataset.words ?? pressed.textContent;
  pressed.dataset.words = before;
  try {
    await navigator.clipboard.writeText(text);
    pressed.textContent = "Copied";
    announce("Copied");
  } catch {
    // Without a secure origin the clipboard is closed: show the text, marked, for the reader to copy.
    const box = el("textarea", { class: "to-copy", readonly: true, "aria-label": "Text to copy", rows: 2 }, text);
    pressed.after(box);
    box.select();
    pressed.textContent = "Copy the marked text";
  }
  setTimeout(() => {
    pressed.textContent = before;
  }, 2500);
}

async function download(pressed, record, offer, format, trouble) {
  fill(trouble);
  pressed.disabled = true;
  try {
    const pictured = format === "png" || format === "svg" ? offer.pictured : {};
    const answer = await ask(productAddress(record.id, offer.product, { ...offer.members, ...pictured, ...offer.only?.[format] }, format));
    const address = URL.createObjectURL(await answer.blob());
    el("a", { href: address, download: `${fileStem(record.name)}_${offer.product}.${format}` }).click();
    setTimeout(() => URL.revokeObjectURL(address), 10_000);
    announce(`${WORDS[format]} downloaded`);
  } catch (fault) {
    showProblem(trouble, fault);
  } finally {
    pressed.disabled = false;
  }
}

function fileStem(name) {
  return name.normalize("NFKD").replace(/[^\p{L}\p{N}.-]+/gu, "_").replace(/^[_.]+|_+$/g, "").slice(0, 60) || "density";
}

function curl(record, offer, format) {
  const address = location.origin + productAddress(record.id, offer.product, { ...offer.members, ...offer.only?.[format] }, format);
  const key = heldKey() ? " \\\n     -H \"Authorization: Bearer $KEY\"" : "";
  return `curl '${address.replaceAll("'", "%27")}'${key} \\\n     --output ${offer.product}.${format}`;
}

function python(record, offer) {
  const request = { set_id: record.id, ...nested(offer.members) };
  const http = heldKey()
    ? [
        "import os",
        "import httpx",
        "from service.client import Client",
        "",
        'headers = {"Authorization": f"Bearer {os.environ[\'KEY\']}"}',
        `http = httpx.Client(base_url=${literal(location.origin)}, headers=headers, timeout=300)`,
        `with Client(${literal(location.origin)}, http=http) as client:`,
      ]
    : ["from service.client import Client", "", `with Client(${literal(location.origin)}) as client:`];
  const call = offer.report
    ? [`    report = client.report(${literal(offer.product)}, request)`]
    : [`    result = client.compute(${literal(offer.product)}, request)`, "    print(result.values.shape, result.metadata[\"unit\"])"];
  const [last, ...lines] = [http.pop(), ...http];
  return [...lines, `request = ${literal(request)}`, last, ...call].join("\n");
}

/** A value as a literal of Python. */
function literal(value) {
  if (value === true) return "True";
  if (value === false) return "False";
  if (value === null) return "None";
  if (Array.isArray(value)) return `[${value.map(literal).join(", ")}]`;
  if (typeof value === "object") return `{${Object.entries(value).map(([name, part]) => `${literal(name)}: ${literal(part)}`).join(", ")}}`;
  return JSON.stringify(value);
}
