// What is looked at, and its place in the address: the fragment holds all that differs from the defaults.

export const DEFAULTS = {
  set: "",
  view: "bring",
  // How the density is made.
  field: "density",
  d_min: null,
  d_max: null,
  window: "none",
  window_b: 10,
  sigma: true,
  merit: false,
  least_merit: null,
  phase_sigma: null,
  // Profile.
  line: "normal",
  normal: "",
  along: "0,0,1",
  from: "0,0,0",
  to: "0,0,1",
  intervals: "",
  marks: true,
  // Slice.
  cut: "cell",
  hkl: "0,0,1",
  offset: 0,
  axes: "ab",
  height: 0,
  cells: 1,
  width: null,
  show: "value",
  palette: "auto",
  scale: "detail",
  low: null,
  high: null,
  contours: "auto",
  step: null,
  zero: false,
  // Whole cell.
  count_in: "rms",
  level: 2,
  below: false,
  kinds: "maximum",
  most: 12,
  turn: "",
  zoom: 1,
};

const state = { ...DEFAULTS };
const listeners = new Set();
let written = "";
let pending = 0;

/** The state as it is now; to be read, never written. */
export function now() {
  return state;
}

/** Change members; views hear of it once. A change of `set` or `view` is a step that "back" undoes. */
export function change(members) {
  const changed = Object.keys(members).filter((name) => state[name] !== members[name]);
  if (!changed.length) return;
  Object.assign(state, members);
  const step = changed.includes("set") || changed.includes("view");
  write(step);
  for (const listener of listeners) listener(changed);
}

/** Change members that the picture shows already, such as its turn: only the address follows. */
export function note(members) {
  Object.assign(state, members);
  write(false);
}

export function onChange(listener) {
  listeners.add(listener);
}

/** The fragment of a state. */
export function fragment(members = state) {
  const parts = new URLSearchParams();
  for (const [name, fallback] of Object.entries(DEFAULTS)) {
    const value = members[name];
    if (value !== fallback && value !== null && value !== undefined) parts.set(name, String(value));
  }
  return parts.toString().replaceAll("%2C", ",").replaceAll("%3A", ":").replaceAll("%3B", ";");
}

/** A state of a fragment; what it does not say, or says wrongly, is the default. */
export function parse(text) {
  const found = { ...DEFAULTS };
  for (const [name, value] of new URLSearchParams(text.replace(/^#/, ""))) {
    if (!(name in DEFAULTS)) continue;
    found[name] = typed(name, value);
  }
  return found;
}

const NUMBERS = new Set(["d_min", "d_max", "least_merit", "phase_sigma", "width", "low", "high", "step"]);

function typed(name, text) {
  const fallback = DEFAULTS[name];
  if (typeof fallback === "boolean") return text === "true";
  if (typeof fallback === "number" || NUMBERS.has(name)) {
    const value = Number(text);
    return text.trim() !== "" && Number.isFinite(value) ? value : fallback;
  }
  return text;
}

/** Take up the state of the address, and follow it from now on. */
export function begin() {
  written = location.hash.replace(/^#/, "");
  Object.assign(state, parse(written));
  const follow = () => {
    const text = location.hash.replace(/^#/, "");
    if (text === written) return;
    clearTimeout(pending);
    pending = 0;
    written = text;
    const next = parse(text);
    const changed = Object.keys(DEFAULTS).filter((name) => state[name] !== next[name]);
    Object.assign(state, next);
    if (changed.length) for (const listener of listeners) listener(changed);
  };
  addEventListener("hashchange", follow);
  addEventListener("popstate", follow);
}

function write(step) {
  if (step) {
    clearTimeout(pending);
    pending = 0;
    put(true);
  } else if (!pending) {
    // Browsers bound how often the address may change.
    pending = setTimeout(() => {
      pending = 0;
      put(false);
    }, 200);
  }
}

function put(step) {
  written = fragment();
  const address = `${location.pathname}${location.search}${written ? `#${written}` : ""}`;
  if (step) history.pushState(null, "", address);
  else history.replaceState(null, "", address);
}

/** The whole address that restores this view. */
export function link() {
  return `${location.origin}${location.pathname}#${fragment()}`;
}
