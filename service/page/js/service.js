// The way to the service: requests with the key, where one is needed, and problems as exceptions.

import { askForKey, heldKey } from "./key.js";

/** The service answered with a problem document (RFC 9457), or did not answer. */
export class Problem extends Error {
  constructor(status, document) {
    super(document.detail || document.title || `The service answered ${status}.`);
    this.status = status;
    this.title = document.title || "";
    this.type = document.type || "";
    this.places = Array.isArray(document.errors) ? document.errors : [];
  }

  /** The kind of problem, the last word of its type. */
  get kind() {
    return this.type.split(":").pop();
  }
}

/** Whether a fault is only that we ourselves gave up waiting. */
export function isAbort(fault) {
  return fault instanceof DOMException && fault.name === "AbortError";
}

/**
 * The service's answer.
 *
 * A service that asks for a key answers 401; then the reader is asked for one, and the request is sent again.
 */
export async function ask(address, options = {}) {
  for (;;) {
    const key = heldKey();
    const headers = { ...options.headers, ...(key ? { Authorization: `Bearer ${key}` } : {}) };
    let answer;
    try {
      answer = await fetch(address, { ...options, headers });
    } catch (fault) {
      if (isAbort(fault)) throw fault;
      throw new Problem(0, { title: "No answer", detail: "The service does not answer. See that it runs, and try again." });
    }
    if (answer.ok) return answer;
    const problem = await problemOf(answer);
    if (answer.status !== 401) throw problem;
    if (!(await askForKey(problem.message, key))) throw problem;
  }
}

export async function askJson(address, options = {}) {
  return (await ask(address, { ...options, headers: { Accept: "application/json", ...options.headers } })).json();
}

/** Send an object as JSON, for a JSON answer. */
export function post(address, body, options = {}) {
  return askJson(address, {
    ...options,
    method: "POST",
    body: JSON.stringify(body),
    headers: { "Content-Type": "application/json" },
  });
}

async function problemOf(answer) {
  let document = null;
  try {
    document = await answer.json();
  } catch {
    // A proxy between us and the service may answer with a page of its own.
  }
  return new Problem(answer.status, document && typeof document === "object" ? document : {});
}

/** The address of a product of a stored set; members that are null are left out. */
export function productAddress(set, product, members, format) {
  const query = new URLSearchParams();
  for (const [name, value] of Object.entries(members)) {
    if (value === null || value === undefined || value === "") continue;
    query.set(name, Array.isArray(value) ? value.join(",") : String(value));
  }
  if (format) query.set("format", format);
  return `/v1/sets/${encodeURIComponent(set)}/${product}?${query.toString().replaceAll("%2C", ",")}`;
}

/** The same members as the object that a request's body holds. */
export function nested(members) {
  const made = {};
  for (const [name, value] of Object.entries(members)) {
    if (value === null || value === undefined || value === "") continue;
    const steps = name.split(".");
    const last = steps.pop();
    let holder = made;
    for (const step of steps) holder = holder[step] ??= {};
    holder[last] = value;
  }
  return made;
}
