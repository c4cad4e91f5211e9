// A pasted table or a delimited file: its columns, and what they probably are.

/** What a column may be, in words. Names on the left are those of the service. */
export const MEANINGS = [
  ["", "leave out"],
  ["h", "h"],
  ["k", "k"],
  ["l", "l, or the order of a stack"],
  ["amplitude", "amplitude |F| or |n|"],
  ["sigma", "σ of the amplitude"],
  ["phase_deg", "phase, degrees"],
  ["phase_sigma_deg", "σ of the phase, degrees"],
  ["merit", "figure of merit"],
  ["real", "real part"],
  ["imag", "imaginary part"],
  ["intensity", "intensity ∝ |F|²"],
  ["intensity_sigma", "σ of the intensity"],
  ["f_squared", "|F|²"],
  ["f_squared_sigma", "σ of |F|²"],
  ["phase_calc_deg", "calculated phase, degrees"],
];

const GUESSES = [
  ["h", /^h$/],
  ["k", /^k$/],
  ["l", /^(l|order|n|m)$/],
  ["phase_sigma_deg", /^(phase_?sigma(_deg)?|sig(ma)?_?phi|phase_error)$/],
  ["intensity_sigma", /^(intensity_sigma|sig(ma)?_?i(ntensity)?|i_sigma)$/],
  ["f_squared_sigma", /^(f_squared_sigma|sig(ma)?_?f(2|sq|²))$/],
  ["sigma", /^(amplitude_)?sig(ma)?(_?f|_?amplitude)?$|^σ$|^error$/],
  ["phase_calc_deg", /^phase_calc(_deg)?$/],
  ["phase_deg", /^(phase(_deg)?|phi|φ|angle)$/],
  ["merit", /^(merit|fom|m_fom)$/],
  ["real", /^(real|re|a)$/],
  ["imag", /^(imag|im|b)$/],
  ["intensity", /^(intensity|i|i_obs)$/],
  ["f_squared", /^(f_squared|f2|fsq|f²)$/],
  ["amplitude", /^(amplitude|f|fo|f_obs|\|f\||abs|modulus)$/],
];
/** Quantities that are measured strengths: they are prepared by the service before they are coefficients. */
const RAW = new Set(["intensity", "intensity_sigma", "f_squared", "f_squared_sigma", "phase_calc_deg"]);

const NUMBER = /^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/;
const UNKNOWN = /^(|\?|\.|nan|null|none|na)$/i;

/**
 * Read a table.
 *
 * Fields are apart by tabs, semicolons, commas or blanks, whichever the first line shows; `#` begins a remark.
 * Returns {heads, rows, named, meanings, remarks}: `rows` of text fields, `named` whether there was a header.
 */
export function readTable(text) {
  const lines = text.split(/\r\n|\n|\r/);
  const kept = [];
  const remarks = [];
  lines.forEach((line, place) => {
    const content = line.replace(/#.*/, "");
    if (content.trim()) kept.push({ content, number: place + 1 });
    else if (line.trim()) remarks.push(line.replace(/^\s*#+\s*/, "").trim());
  });
  if (!kept.length) throw tableFault("The table is empty", "there is no line with numbers", "paste lines of numbers, or a header and lines of numbers");
  const mark = ["\t", ";", ","].find((one) => kept[0].content.includes(one));
  const split = (line) => (mark ? line.split(mark).map((field) => field.trim()) : line.trim().split(/\s+/));
  const first = split(kept[0].content);
  const named = first.some((field) => !NUMBER.test(decimal(field, mark)) && !UNKNOWN.test(field));
  const heads = named ? first.map(clean) : first.map((_, i) => `column ${i + 1}`);
  const rows = kept.slice(named ? 1 : 0).map(({ content, number }) => {
    const fields = split(content).map((field) => decimal(field, mark));
    if (fields.length !== heads.length) {
      throw tableFault("A line is of another length", `line ${number} has ${fields.length} fields`, `give ${heads.length}, as in the first line`);
    }
    return fields;
  });
  if (!rows.length) throw tableFault("The table has no rows", "there is a header alone", "give at least one line of numbers");
  return { heads, rows, named, meanings: named ? heads.map(guess) : byPlace(heads.length), remarks };
}

function tableFault(title, reason, cure) {
  const fault = new Error(`${reason}: ${cure}`);
  return Object.assign(fault, { title, places: [{ pointer: "the table", reason, cure }] });
}

/** Decimal commas, where semicolons or tabs stand between fields. */
function decimal(field, mark) {
  return mark === ";" || mark === "\t" ? field.replace(",", ".") : field;
}

function clean(head) {
  return head.replace(/^["']|["']$/g, "");
}

function guess(head, place, heads) {
  const name = head.toLowerCase().replaceAll(/[\s.-]+/g, "_").replace(/[([{].*$/, "").replace(/_$/, "");
  const found = GUESSES.find(([, pattern]) => pattern.test(name))?.[0] ?? "";
  const before = heads.slice(0, place).some((other) => other === head);
  return before ? "" : found;
}

/** What columns without names most likely are: indices, amplitude, phase, σ. */
function byPlace(size) {
  if (size >= 5) return ["h", "k", "l", "amplitude", "phase_deg", "sigma", ...Array(size).fill("")].slice(0, size);
  if (size === 4) return ["h", "k", "amplitude", "phase_deg"];
  return ["l", "amplitude", "phase_deg"].slice(0, size);
}

/** 1, 2 or 3 by the index columns that are named; 0 where they fit nothing. */
export function dimensionOf(meanings) {
  const has = (name) => meanings.includes(name);
  if (has("h") && has("k") && has("l")) return 3;
  if (has("h") && has("k")) return 2;
  return has("l") && !has("h") && !has("k") ? 1 : 0;
}

export function isRaw(meanings) {
  return meanings.some((name) => RAW.has(name));
}

/** The table as the service reads it: CSV under its own names, the fields as they were typed. */
export function toCsv(table, meanings) {
  const raw = isRaw(meanings);
  const rename = (name) => (raw && name === "sigma" ? "amplitude_sigma" : name);
  const places = meanings.map((name, place) => (name ? place : -1)).filter((place) => place >= 0);
  const lines = [places.map((place) => rename(meanings[place])).join(",")];
  for (const row of table.rows) lines.push(places.map((place) => (UNKNOWN.test(row[place]) ? "" : row[place])).join(","));
  return `${lines.join("\n")}\n`;
}

/** Complaints that need no service to be seen: [place, reason, cure]. */
export function complaints(table, meanings) {
  const found = [];
  for (const [name, words] of MEANINGS) {
    if (name && meanings.filter((one) => one === name).length > 1) {
      found.push({ pointer: "the columns", reason: `two columns are “${words}”`, cure: "choose one, and leave the other out" });
    }
  }
  if (!dimensionOf(meanings)) {
    found.push({ pointer: "the columns", reason: "no set of index columns is complete", cure: "name h, k and l of a crystal, h and k of a planar lattice, or l alone of a stack" });
  }
  const has = (name) => meanings.includes(name);
  if (!has("amplitude") && !(has("real") && has("imag")) && !has("intensity") && !has("f_squared")) {
    found.push({ pointer: "the columns", reason: "no column says how strong the reflections are", cure: "name an amplitude, an intensity, or a real and an imaginary part" });
  }
  meanings.forEach((name, place) => {
    if (!name) return;
    const row = table.rows.findIndex((fields) => !NUMBER.test(fields[place]) && !UNKNOWN.test(fields[place]));
    if (row >= 0) {
      found.push({ pointer: `row ${row + 1}, ${table.heads[place]}`, reason: `“${table.rows[row][place].slice(0, 30)}” is not a number`, cure: "mend it, or leave the column out" });
    }
  });
  return found;
}
