// Colours of values, along paths of the OKLab colour space: the same as of the service's pictures
// (service/pictures/palettes.py and scales.py; a test compares the two).

export const SHADES = 256;
const NEGATIVE_SHARE = 0.05;

const TO_ROOTS = [
  [1, 0.3963377774, 0.2158037573],
  [1, -0.1055613458, -0.0638541728],
  [1, -0.0894841775, -1.291485548],
];
const TO_LINEAR = [
  [4.0767416621, -3.3077115913, 0.2309699292],
  [-1.2684380046, 2.6097574011, -0.3413193965],
  [-0.0041960863, -0.7034186147, 1.707614701],
];

const SEQUENTIAL = [lch(0.23, 0.08, 285), lch(0.595, 0.165, 180), lch(0.96, 0.055, 95)];
const DIVERGING = {
  light: [lch(0.4, 0.135, 258), lch(0.97, 0, 0), lch(0.4, 0.115, 40)],
  dark: [lch(0.86, 0.078, 235), lch(0.24, 0, 0), lch(0.86, 0.115, 75)],
};

function lch(light, chroma, hue) {
  const angle = (hue * Math.PI) / 180;
  return [light, chroma * Math.cos(angle), chroma * Math.sin(angle)];
}

function dot(rows, vector) {
  return rows.map((row) => row[0] * vector[0] + row[1] * vector[1] + row[2] * vector[2]);
}

function srgb(lab) {
  const linear = dot(TO_LINEAR, dot(TO_ROOTS, lab).map((root) => root ** 3));
  return linear.map((part) => {
    const bent = part <= 0.0031308 ? 12.92 * part : 1.055 * part ** (1 / 2.4) - 0.055;
    return Math.min(1, Math.max(0, bent));
  });
}

/** sRGB 0…1 of a palette at a place 0…1; of a diverging one ½ is the centre. */
export function colourAt(kind, theme, place) {
  if (kind === "sequential") {
    const [first, middle, last] = SEQUENTIAL;
    return srgb(first.map((_, i) => (1 - place) ** 2 * first[i] + 2 * place * (1 - place) * middle[i] + place ** 2 * last[i]));
  }
  const [low, centre, high] = DIVERGING[theme];
  const t = 2 * place - 1;
  return srgb(centre.map((part, i) => part + Math.max(-t, 0) * (low[i] - part) + Math.max(t, 0) * (high[i] - part)));
}

/** How values become colours: ends of the scale, kind of palette, and 256 colours as RGBA bytes. */
export function colourScale(low, high, wanted, theme) {
  if (!(high > low)) {
    const half = high ? 0.5 * Math.abs(high) : 0.5;
    [low, high] = [low - half, high + half];
  }
  const kind = wanted === "auto" ? (-low > NEGATIVE_SHARE * (high - low) ? "diverging" : "sequential") : wanted;
  let [first, last] = [0, 1];
  if (kind === "diverging") {
    // Zero is the middle, and the palette is used as far as the values reach from it.
    const reach = Math.max(Math.abs(high), Math.abs(low));
    [first, last] = [0.5 + low / (2 * reach), 0.5 + high / (2 * reach)];
  }
  const colours = new Uint8ClampedArray(4 * SHADES);
  for (let shade = 0; shade < SHADES; shade += 1) {
    const rgb = colourAt(kind, theme, first + ((last - first) * shade) / (SHADES - 1));
    colours.set([...rgb.map((part) => 255 * part), 255], 4 * shade);
  }
  return { low, high, kind, theme, colours };
}

/** The number of a value's colour, 0…255. */
export function shade(scale, value) {
  const place = Math.round(((value - scale.low) / (scale.high - scale.low)) * (SHADES - 1));
  return place < 0 ? 0 : place > SHADES - 1 ? SHADES - 1 : place;
}
