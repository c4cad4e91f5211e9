// From what the reader brings to a set that the service keeps.

import { ask, askJson, post } from "../service.js";

const SETS = "/v1/sets";

/** Keep a set of a JSON document: {set, name?, tags?}; other members of a request are not part of a set. */
export function keepDocument(document, fallbackName) {
  const body = { set: document.set };
  const name = document.name ?? fallbackName;
  if (name) body.name = name;
  if (document.tags) body.tags = document.tags;
  return post(SETS, body);
}

/** Keep a set of a form: {request, columns?, reflections?, filename?}. */
export function keepParts(parts) {
  const form = new FormData();
  form.set("request", new Blob([JSON.stringify(parts.request)], { type: "application/json" }), "request.json");
  for (const name of ["columns", "reflections"]) {
    const part = parts[name];
    if (!part) continue;
    const type = part.type || (part.name?.endsWith(".npz") ? "application/x-npz" : "application/octet-stream");
    form.set(name, new Blob([part], { type }), parts.filename ?? part.name ?? name);
  }
  return askJson(SETS, { method: "POST", body: form });
}

/** Keep a file that says itself what it is, such as a CIF. */
export function keepFile(file, name) {
  const form = new FormData();
  const request = { set: { values: "structure_factor" }, name };
  form.set("request", new Blob([JSON.stringify(request)], { type: "application/json" }), "request.json");
  form.set("reflections", new Blob([file], { type: "chemical/x-cif" }), file.name);
  return askJson(SETS, { method: "POST", body: form });
}

export function listSets(search, after) {
  const query = new URLSearchParams({ limit: "20" });
  if (search) query.set("search", search);
  if (after !== null && after !== undefined) query.set("after", String(after));
  return askJson(`${SETS}?${query}`);
}

export function lookAt(id) {
  return askJson(`${SETS}/${encodeURIComponent(id)}`);
}

export function remove(id) {
  return ask(`${SETS}/${encodeURIComponent(id)}`, { method: "DELETE" });
}
