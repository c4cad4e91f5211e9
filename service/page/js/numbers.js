// Numbers as people read them: a value with as many digits as its standard uncertainty allows.

const MINUS = "−";

/** Digits that matter, without needless zeros. */
export function short(value, digits = 4) {
  if (value === null || value === undefined || !Number.isFinite(value)) return "–";
  if (value === 0) return "0";
  const size = Math.abs(value);
  const text = size >= 1e5 || size < 1e-3 ? exponent(value, digits) : String(Number(value.toPrecision(digits)));
  return text.replaceAll("-", MINUS);
}

function exponent(value, digits) {
  const [mantissa, power] = value.toExponential(digits - 1).split("e");
  return `${Number(mantissa)}·10${raised(Number(power))}`;
}

function raised(power) {
  const figures = "⁰¹²³⁴⁵⁶⁷⁸⁹";
  return (power < 0 ? "⁻" : "") + [...String(Math.abs(power))].map((figure) => figures[figure]).join("");
}

/** A fixed number of decimals, with a true minus sign. */
export function fixed(value, decimals) {
  if (value === null || value === undefined || !Number.isFinite(value)) return "–";
  const text = value.toFixed(decimals);
  return (Number(text) === 0 ? text.replace("-", "") : text).replace("-", MINUS);
}

/** "value ± σ" with two digits of σ; without σ the value alone. */
export function withSigma(value, sigma, digits = 4) {
  if (value === null || value === undefined) return "–";
  if (sigma === null || sigma === undefined) return short(value, digits);
  if (!(sigma > 0)) return `${short(value, digits)} ± 0`;
  const decimals = 1 - Math.floor(Math.log10(sigma));
  if (decimals > 8 || decimals < 0 || Math.abs(value) >= 1e6) return `${short(value, digits)} ± ${short(sigma, 2)}`;
  return `${fixed(value, decimals)} ± ${fixed(sigma, decimals)}`;
}

/** The same in the short way of tables: the last digits' uncertainty in brackets, 11.413(17). */
export function inBrackets(value, sigma, digits = 4) {
  if (value === null || value === undefined) return "–";
  if (!(sigma > 0)) return short(value, digits);
  const decimals = 1 - Math.floor(Math.log10(sigma));
  if (decimals > 8 || Math.abs(value) >= 1e6) return withSigma(value, sigma, digits);
  if (decimals <= 0) return `${fixed(value, 0)}(${Math.round(sigma)})`;
  return `${fixed(value, decimals)}(${Math.round(sigma * 10 ** decimals)})`;
}

/** A count with its thousands apart. */
export function count(value) {
  return Number(value).toLocaleString("en-GB").replaceAll(",", " ");
}

export function bytes(value) {
  const steps = ["bytes", "kB", "MB", "GB"];
  let step = 0;
  while (value >= 1000 && step < steps.length - 1) {
    value /= 1000;
    step += 1;
  }
  return `${short(value, 3)} ${steps[step]}`;
}

/** Three numbers in brackets. */
export function triple(values, decimals = 3) {
  return `(${values.map((value) => fixed(value, decimals)).join(", ")})`;
}

/** A step of 1, 2 or 5 times a power of ten, so that `span` holds about `parts` of them. */
export function niceStep(span, parts) {
  if (!(span > 0)) return 1;
  const rough = span / parts;
  const power = 10 ** Math.floor(Math.log10(rough));
  return [1, 2, 5, 10].map((factor) => factor * power).find((step) => step >= rough * 0.999);
}

/** A unit as it is shown: the field's own, or none. */
export function unitText(unit) {
  if (unit === "1") return "";
  return unit === "arbitrary" ? "arbitrary units" : unit;
}
