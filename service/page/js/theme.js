// Light or dark: as the system has it, unless the reader says otherwise.

const PLACE = "densityloom-colours";
const system = matchMedia("(prefers-color-scheme: dark)");
const listeners = new Set();
const probe = document.createElement("span");

export function chosen() {
  const held = localStorage.getItem(PLACE);
  return held === "light" || held === "dark" ? held : "system";
}

/** "light" or "dark", as pictures are drawn now. */
export function theme() {
  const held = chosen();
  return held === "system" ? (system.matches ? "dark" : "light") : held;
}

export function choose(name) {
  if (name === "system") localStorage.removeItem(PLACE);
  else localStorage.setItem(PLACE, name);
  apply();
}

export function onTheme(listener) {
  listeners.add(listener);
}

/** The colour of a custom property of the style sheet, as CSS that a canvas understands. */
export function colour(name) {
  probe.style.color = `var(${name})`;
  return getComputedStyle(probe).color;
}

/** The same as red, green and blue, 0…1. */
export function rgb(name) {
  const canvas = document.createElement("canvas");
  canvas.width = canvas.height = 1;
  const context = canvas.getContext("2d", { willReadFrequently: true });
  context.fillStyle = colour(name);
  context.fillRect(0, 0, 1, 1);
  return [...context.getImageData(0, 0, 1, 1).data.slice(0, 3)].map((part) => part / 255);
}

function apply() {
  document.documentElement.dataset.theme = theme();
  for (const listener of listeners) listener(theme());
}

export function begin() {
  probe.hidden = true;
  document.body.append(probe);
  system.addEventListener("change", apply);
  apply();
}
