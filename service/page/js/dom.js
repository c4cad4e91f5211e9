// Elements of the page. Text always goes in as text: nothing in this page parses HTML.

/** An element with attributes, listeners (`onclick`), properties (`.value`) and children. */
export function el(tag, attributes = {}, ...children) {
  const node = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (value === undefined || value === null || value === false) continue;
    if (name.startsWith(".")) node[name.slice(1)] = value;
    else if (name.startsWith("on")) node.addEventListener(name.slice(2), value);
    else node.setAttribute(name, value === true ? "" : String(value));
  }
  node.append(...children.flat(Infinity).filter((child) => child !== null && child !== undefined && child !== false));
  return node;
}

/** Put children in the place of what a node holds. */
export function fill(node, ...children) {
  node.replaceChildren(...children.flat(Infinity).filter((child) => child !== null && child !== undefined && child !== false));
  return node;
}

let count = 0;

/** An id that no other element has. */
export function fresh(stem) {
  count += 1;
  return `${stem}-${count}`;
}

/** A control under its label, with an optional line of help. */
export function field(label, control, help) {
  const id = control.id || fresh("field");
  control.id = id;
  const told = help ? el("small", { id: `${id}-help` }, help) : null;
  if (told) control.setAttribute("aria-describedby", told.id);
  return el("div", { class: "field" }, el("label", { for: id }, label), control, told);
}

/** A check box with its words beside it. */
export function tick(label, checked, onchange, disabled = false) {
  const id = fresh("tick");
  const box = el("input", { type: "checkbox", id, ".checked": checked, ".disabled": disabled, onchange: () => onchange(box.checked) });
  return el("div", { class: "tick" }, box, el("label", { for: id }, label));
}

/** A choice in words; options are [value, words] pairs. */
export function choice(options, value, onchange, attributes = {}) {
  return el(
    "select",
    { ...attributes, onchange: (event) => onchange(event.target.value) },
    options.map(([name, words]) => el("option", { value: name, ".selected": name === value }, words)),
  );
}

/** A number to be typed: `onchange` gets it, or null where the field is empty. */
export function number(value, onchange, attributes = {}) {
  return el("input", {
    type: "number",
    step: "any",
    inputmode: "decimal",
    autocomplete: "off",
    ".value": value ?? "",
    ...attributes,
    onchange: (event) => {
      const input = event.target;
      if (!input.validity.valid) return input.reportValidity();
      return onchange(input.value.trim() === "" ? null : Number(input.value));
    },
  });
}

export function button(words, onclick, attributes = {}) {
  return el("button", { type: "button", ...attributes, onclick }, words);
}

/** A table in a box of its own, which scrolls where the screen is narrow. */
export function table(caption, heads, rows, attributes = {}) {
  return el(
    "div",
    { class: "scrolls", tabindex: 0, role: "region", "aria-label": caption },
    el(
      "table",
      attributes,
      el("caption", {}, caption),
      el("thead", {}, el("tr", {}, heads.map((head) => el("th", { scope: "col" }, head)))),
      el("tbody", {}, rows),
    ),
  );
}

/** Say something to those who do not see the page. */
export function announce(words) {
  const place = document.getElementById("told");
  if (place.textContent !== words) place.textContent = words;
}
