// The map: colours, contours, cell outline, scale bar and read-out on one canvas, in the plane's true shape.

import { announce, el, fill } from "../dom.js";
import { combine, dot } from "../lattice.js";
import { fixed, niceStep, short, triple, unitText, withSigma } from "../numbers.js";
import { SHADES, colourScale, shade } from "../palettes.js";
import { colour, theme } from "../theme.js";
import { ColourBar } from "./bar.js";
import { autoStep, levelsAt, piecesOf } from "./contours.js";
import { tracesOf } from "./traces.js";

const MARGIN = 30;
const STEPS = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] };

export class SliceMap {
  constructor(host) {
    this.canvas = el("canvas", { class: "map" });
    this.over = el("canvas", { class: "map over", "aria-hidden": "true" });
    this.readout = el("p", { class: "readout" });
    this.bar = new ColourBar();
    this.box = el(
      "div",
      {
        class: "map-box",
        tabindex: 0,
        role: "application",
        "aria-roledescription": "map",
        onkeydown: (event) => this.#key(event),
        onpointermove: (event) => this.#point(event),
        onpointerdown: (event) => this.#point(event),
        onpointerleave: () => this.#rest(),
      },
      this.canvas,
      this.over,
    );
    fill(host, this.readout, this.box, this.bar.element);
    this.#rest();
    this.watch = new ResizeObserver(() => this.redraw());
    this.watch.observe(this.box);
  }

  /**
   * Show samples.
   *
   * `options`: {lattice, palette, low, high, contours, step, zero, sigmaRms, names, words}; low and high null: of the values.
   */
  show(samples, options) {
    this.samples = samples;
    this.options = options;
    this.sigma = null;
    const { minimum, maximum } = samples.summary;
    this.scale = colourScale(options.low ?? minimum, options.high ?? maximum, options.palette, theme());
    this.box.setAttribute("aria-label", `${options.words}: from ${short(minimum)} to ${short(maximum)} ${unitText(samples.unit)}. Arrow keys move the read-out.`);
    this.#paint();
    this.redraw();
  }

  /** Standard uncertainties of the same samples, for the read-out. */
  setSigma(samples) {
    this.sigma = samples;
    if (this.place) this.#read();
  }

  redraw() {
    if (!this.samples) return;
    this.#measure();
    this.#draw();
    this.#cross();
    this.#showBar();
  }

  /** The samples as an image of one pixel each; the first axis to the right, the second upwards. */
  #paint() {
    const { values, first, second } = this.samples;
    const [n1, n2] = [first.count, second.count];
    this.image ??= document.createElement("canvas");
    this.image.width = n1;
    this.image.height = n2;
    const context = this.image.getContext("2d");
    const data = context.createImageData(n1, n2);
    const pixels = new Uint32Array(data.data.buffer);
    const colours = new Uint32Array(this.scale.colours.buffer);
    const factor = (SHADES - 1) / (this.scale.high - this.scale.low);
    const low = this.scale.low;
    for (let i = 0; i < n1; i += 1) {
      for (let j = 0; j < n2; j += 1) {
        const value = values[i * n2 + j];
        if (Number.isNaN(value)) continue;
        const place = Math.round((value - low) * factor);
        pixels[j * n1 + i] = colours[place < 0 ? 0 : place >= SHADES ? SHADES - 1 : place];
      }
    }
    context.putImageData(data, 0, 0);
  }

  #measure() {
    const { first, second } = this.samples;
    const cosine = dot(first.direction, second.direction);
    const sine = Math.sqrt(Math.max(0, 1 - cosine * cosine));
    const lengths = [(first.count - 1) * first.step, (second.count - 1) * second.step];
    const left = Math.min(0, lengths[1] * cosine);
    const width = Math.max(lengths[0], lengths[0] + lengths[1] * cosine, lengths[1] * cosine) - left;
    const height = lengths[1] * sine;
    const room = Math.max(200, this.box.clientWidth) - 2 * MARGIN;
    const most = Math.max(260, innerHeight * 0.66);
    const scale = Math.min(room / width, most / height);
    const size = { width: Math.max(200, this.box.clientWidth), height: Math.round(scale * height) + 2 * MARGIN + 8 };
    const origin = [(size.width - scale * width) / 2 - scale * left, MARGIN + scale * height];
    this.frame = { cosine, sine, lengths, scale, size, origin };
    for (const canvas of [this.canvas, this.over]) {
      const [w, h] = [Math.round(size.width * devicePixelRatio), Math.round(size.height * devicePixelRatio)];
      if (canvas.width !== w || canvas.height !== h) {
        canvas.width = w;
        canvas.height = h;
        canvas.style.height = `${size.height}px`;
      }
    }
    this.box.style.height = `${size.height}px`;
  }

  /** Pixels of a place s, t Å along the two axes. */
  #pixel(s, t) {
    const { origin, scale, cosine, sine } = this.frame;
    return [origin[0] + scale * (s + t * cosine), origin[1] - scale * t * sine];
  }

  #draw() {
    const { frame, samples, options } = this;
    const context = this.canvas.getContext("2d");
    context.setTransform(devicePixelRatio, 0, 0, devicePixelRatio, 0, 0);
    context.clearRect(0, 0, frame.size.width, frame.size.height);
    context.save();
    this.#outline(context);
    context.clip();
    const { first, second } = samples;
    const { scale, cosine, sine } = frame;
    const [x, y] = this.#pixel(0, 0);
    context.save();
    context.transform(scale * first.step, 0, scale * second.step * cosine, -scale * second.step * sine, x, y);
    context.imageSmoothingEnabled = true;
    context.imageSmoothingQuality = "high";
    context.drawImage(this.image, -0.5, -0.5);
    context.restore();
    this.#contours(context);
    this.#cells(context);
    context.restore();
    this.#outline(context);
    context.strokeStyle = colour("--ink");
    context.lineWidth = 1;
    context.stroke();
    this.#names(context, options.names);
    this.#scaleBar(context);
  }

  #outline(context) {
    const [l1, l2] = this.frame.lengths;
    context.beginPath();
    for (const [s, t] of [[0, 0], [l1, 0], [l1, l2], [0, l2]]) context.lineTo(...this.#pixel(s, t));
    context.closePath();
  }

  #contours(context) {
    const { samples, options, scale } = this;
    const { minimum, maximum } = samples.summary;
    const step = {
      none: null,
      auto: autoStep(scale.low, scale.high),
      step: options.step,
      sigma: options.sigmaRms ? (options.step ?? 3) * options.sigmaRms : null,
    }[options.contours];
    this.levels = step ? levelsAt(step, minimum, maximum, options.zero) : [];
    this.step = step;
    if (this.levels === null) {
      this.tooMany = true;
      this.levels = [];
    } else this.tooMany = false;
    const { first, second } = samples;
    for (const level of this.levels) {
      const pieces = piecesOf(samples.values, first.count, second.count, level);
      const place = 4 * shade(scale, level);
      const [red, green, blue] = scale.colours.subarray(place, place + 3);
      const dark = 0.2126 * red + 0.7152 * green + 0.0722 * blue < 120;
      context.strokeStyle = dark ? "rgba(255,255,255,0.62)" : "rgba(12,16,34,0.55)";
      context.lineWidth = Math.abs(level) < 1e-9 * step ? 1.6 : 0.9;
      context.setLineDash(level < -1e-9 * step ? [4, 3] : []);
      context.beginPath();
      for (let i = 0; i < pieces.length; i += 4) {
        context.moveTo(...this.#pixel(pieces[i] * first.step, pieces[i + 1] * second.step));
        context.lineTo(...this.#pixel(pieces[i + 2] * first.step, pieces[i + 3] * second.step));
      }
      context.stroke();
    }
    context.setLineDash([]);
  }

  /** Traces of the faces of unit cells: where a fractional coordinate is a whole number. */
  #cells(context) {
    const { lattice } = this.options;
    const { first, second, origin } = this.samples;
    context.strokeStyle = this.scale.kind === "diverging" && theme() === "light" ? "rgba(12,16,34,0.75)" : "rgba(255,255,255,0.8)";
    context.lineWidth = 1.2;
    context.beginPath();
    for (const [start, end] of tracesOf(origin.fractional, [lattice.growth(first.direction), lattice.growth(second.direction)], this.frame.lengths)) {
      context.moveTo(...this.#pixel(...start));
      context.lineTo(...this.#pixel(...end));
    }
    context.stroke();
  }

  #names(context, names) {
    if (!names) return;
    const [l1, l2] = this.frame.lengths;
    const size = parseFloat(getComputedStyle(document.documentElement).fontSize);
    context.fillStyle = colour("--ink");
    context.font = `italic ${Math.round(size)}px Georgia, serif`;
    context.textAlign = "center";
    context.textBaseline = "middle";
    const [x1, y1] = this.#pixel(l1, 0);
    const [x2, y2] = this.#pixel(0, l2);
    context.fillText(names[0], x1 + 12, y1 + 4);
    context.fillText(names[1], x2 - 4, y2 - 14);
    const [x0, y0] = this.#pixel(0, 0);
    context.fillText("0", x0 - 11, y0 + 9);
  }

  #scaleBar(context) {
    const { scale, size, lengths } = this.frame;
    const long = niceStep(lengths[0] * 0.9, 4);
    const y = size.height - 12;
    const x = this.#pixel(0, 0)[0] + 8;
    const right = Math.min(x + scale * long, size.width - 4);
    context.strokeStyle = context.fillStyle = colour("--ink");
    context.lineWidth = 2;
    context.beginPath();
    context.moveTo(x, y - 4);
    context.lineTo(x, y);
    context.lineTo(right, y);
    context.lineTo(right, y - 4);
    context.stroke();
    context.font = `${Math.round(parseFloat(getComputedStyle(document.documentElement).fontSize) * 0.8)}px system-ui, sans-serif`;
    context.textAlign = "left";
    context.textBaseline = "alphabetic";
    context.fillText(`${short(long)} Å`, right + 6, y + 2);
  }

  #showBar() {
    const { scale, samples } = this;
    const { minimum, maximum } = samples.summary;
    const beyond = minimum < scale.low - 1e-9 * Math.abs(scale.low) || maximum > scale.high + 1e-9 * Math.abs(scale.high);
    const remarks = [
      this.tooMany ? "So many contour lines would not be told apart: give a larger step." : "",
      this.levels.length ? `Contours every ${short(this.step)} ${unitText(samples.unit)}${minimum < 0 ? ", dashed below zero" : ""}.` : "",
      beyond ? "Values beyond the scale have its end colours." : "",
    ];
    this.bar.show(scale, samples.unit, remarks.filter(Boolean));
    if (this.place) this.#read();
  }

  #point(event) {
    const box = this.canvas.getBoundingClientRect();
    const { origin, scale, cosine, sine } = this.frame ?? {};
    if (!scale) return;
    const t = (origin[1] - (event.clientY - box.top)) / (scale * sine);
    const s = (event.clientX - box.left - origin[0]) / scale - t * cosine;
    const { first, second } = this.samples;
    const place = [Math.round(s / first.step), Math.round(t / second.step)];
    if (place[0] < 0 || place[1] < 0 || place[0] >= first.count || place[1] >= second.count) return this.#rest();
    this.place = place;
    this.#cross();
    return this.#read();
  }

  #key(event) {
    const step = STEPS[event.key];
    if (!step || !this.samples) return;
    event.preventDefault();
    const { first, second } = this.samples;
    const pace = event.shiftKey ? 10 : 1;
    const [i, j] = this.place ?? [Math.floor(first.count / 2), Math.floor(second.count / 2)];
    const inside = (value, size) => Math.min(size - 1, Math.max(0, value));
    this.place = [inside(i + pace * step[0], first.count), inside(j + pace * step[1], second.count)];
    this.#cross();
    this.#read();
    announce(this.readout.textContent);
  }

  #rest() {
    this.place = null;
    fill(this.readout, el("span", { class: "quiet" }, "Point at the map to read it."));
    this.bar.mark(null);
    if (this.frame) this.#cross();
  }

  #cross() {
    const context = this.over.getContext("2d");
    context.setTransform(devicePixelRatio, 0, 0, devicePixelRatio, 0, 0);
    context.clearRect(0, 0, this.frame.size.width, this.frame.size.height);
    if (!this.place) return;
    const { first, second } = this.samples;
    const [x, y] = this.#pixel(this.place[0] * first.step, this.place[1] * second.step);
    for (const [style, width] of [["rgba(0,0,0,0.75)", 4], ["rgba(255,255,255,0.95)", 1.6]]) {
      context.strokeStyle = style;
      context.lineWidth = width;
      context.beginPath();
      for (const [dx, dy] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
        context.moveTo(x + 4 * dx, y + 4 * dy);
        context.lineTo(x + 12 * dx, y + 12 * dy);
      }
      context.stroke();
    }
  }

  /** Fractional and Cartesian position of a sample. */
  positionOf([i, j]) {
    const { first, second, origin } = this.samples;
    const cartesian = combine([origin.cartesian, first.direction, second.direction], [1, i * first.step, j * second.step]);
    return { cartesian, fractional: this.options.lattice.toFractional(cartesian) };
  }

  #read() {
    const { samples, place } = this;
    const index = place[0] * samples.second.count + place[1];
    const value = samples.values[index];
    const sigma = this.sigma?.values.length === samples.values.length ? this.sigma.values[index] : null;
    const { fractional, cartesian } = this.positionOf(place);
    fill(
      this.readout,
      el("strong", {}, `${withSigma(value, sigma)} ${unitText(samples.unit)}`),
      el("span", {}, `at ${triple(fractional)}`),
      el("span", { class: "quiet" }, `${cartesian.map((part) => fixed(part, 2)).join(", ")} Å`),
    );
    this.bar.mark(value);
  }
}
