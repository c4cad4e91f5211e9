// The curve: values with their σ band, layers and intervals marked, a read-out that follows pointer or keys.

import uPlot from "../../vendor/uplot/uPlot.esm.js";
import { announce, el, fill } from "../dom.js";
import { short, unitText, withSigma } from "../numbers.js";
import { colour } from "../theme.js";

const STEPS = { ArrowLeft: -1, ArrowRight: 1, PageDown: -20, PageUp: 20 };

export class Chart {
  constructor(host, { answer, layers, marks, words, onRegion, onLayer, intervals }) {
    this.answer = answer;
    this.layers = marks ? layers : [];
    this.onLayer = onLayer;
    this.onRegion = onRegion;
    this.intervals = intervals;
    this.marked = { layer: null, interval: null };
    const axis = answer.axes[0];
    this.positions = answer.values.map((_, i) => axis.start + i * axis.step);
    this.length = this.positions.at(-1);
    this.readout = el("p", { class: "readout" });
    this.box = el("div", {
      class: "curve-box",
      tabindex: 0,
      role: "application",
      "aria-roledescription": "curve",
      "aria-label": `${words}: the curve. Arrow keys move the read-out; I begins and ends an interval to integrate.`,
      onkeydown: (event) => this.#key(event),
    });
    const band = answer.uncertainty ? el("p", { class: "quiet key-line" }, "The band is one standard uncertainty to either side.") : null;
    fill(host, this.readout, this.box, band);
    this.#rest();
    this.plot = new uPlot(this.#options(), this.#data(), this.box);
    this.#fingers();
    this.watch = new ResizeObserver(() => this.#resize());
    this.watch.observe(this.box);
  }

  destroy() {
    this.watch.disconnect();
    this.plot.destroy();
  }

  highlightLayer(place) {
    this.marked.layer = place;
    this.plot.redraw(false);
  }

  highlightInterval(place) {
    this.marked.interval = place;
    this.plot.redraw(false);
  }

  setIntervals(list) {
    this.intervals = list;
    this.plot.redraw(false);
  }

  #data() {
    const { values, uncertainty } = this.answer;
    if (!uncertainty) return [this.positions, values];
    return [this.positions, values, values.map((value, i) => value + uncertainty[i]), values.map((value, i) => value - uncertainty[i])];
  }

  #size() {
    const width = Math.max(240, this.box.clientWidth);
    return { width, height: Math.max(260, Math.min(Math.round(width * 0.52), Math.round(innerHeight * 0.62))) };
  }

  #resize() {
    const size = this.#size();
    if (size.width !== this.plot.width) this.plot.setSize(size);
  }

  #options() {
    const ink = colour("--ink");
    const faint = colour("--line");
    const font = `${Math.round(parseFloat(getComputedStyle(document.documentElement).fontSize) * 0.8)}px system-ui, sans-serif`;
    const axis = { stroke: ink, font, labelFont: font, grid: { stroke: faint, width: 1 }, ticks: { stroke: faint, width: 1 } };
    const curve = colour("--curve");
    const unseen = { stroke: "transparent", pxAlign: 0, points: { show: false } };
    const series = [{}, { stroke: curve, width: 1.8, pxAlign: 0, points: { show: false } }];
    const bands = [];
    if (this.answer.uncertainty) {
      series.push(unseen, unseen);
      bands.push({ series: [2, 3], fill: colour("--band") });
    }
    return {
      ...this.#size(),
      series,
      bands,
      // Whole pixels would turn slopes into stairs.
      pxAlign: 0,
      legend: { show: false },
      scales: { x: { time: false, range: [this.positions[0], this.length] } },
      axes: [
        { ...axis, label: "position, Å", labelSize: 22, size: 34, values: (_, ticks) => ticks.map((tick) => short(tick)) },
        { ...axis, label: unitText(this.answer.unit), labelSize: 22, size: 62, values: (_, ticks) => ticks.map((tick) => short(tick)) },
      ],
      cursor: { drag: { x: true, y: false, setScale: false }, y: false, points: { size: 8, fill: curve } },
      select: { show: true, left: 0, top: 0, width: 0, height: 0 },
      hooks: {
        setCursor: [(plot) => this.#moved(plot)],
        setSelect: [(plot) => this.#selected(plot)],
        drawClear: [(plot) => this.#under(plot)],
        draw: [(plot) => this.#over(plot)],
      },
    };
  }

  #moved(plot) {
    const place = plot.cursor.idx;
    if (place === null || place === undefined) return this.#rest();
    const { values, uncertainty, unit } = this.answer;
    this.place = place;
    fill(
      this.readout,
      el("span", {}, `at ${short(this.positions[place], 5)} Å`),
      el("strong", {}, `${withSigma(values[place], uncertainty?.[place])} ${unitText(unit)}`),
      this.begun === undefined ? null : el("span", {}, `interval from ${short(this.begun)} Å …`),
    );
    const layer = this.layers.findIndex((one) => this.#parts(one).some(([from, to]) => this.positions[place] >= from && this.positions[place] <= to));
    if (layer !== this.hovered) {
      this.hovered = layer;
      this.onLayer(layer < 0 ? null : layer);
    }
    return undefined;
  }

  #rest() {
    fill(this.readout, el("span", { class: "quiet" }, "Point at the curve to read it; drag along it to integrate."));
    if (this.hovered !== undefined && this.hovered >= 0) this.onLayer(null);
    this.hovered = undefined;
  }

  #selected(plot) {
    const { left, width } = plot.select;
    if (width < 3) return;
    const from = plot.posToVal(left, "x");
    const to = plot.posToVal(left + width, "x");
    plot.setSelect({ left: 0, width: 0, top: 0, height: 0 }, false);
    this.onRegion(from, to);
  }

  /** A finger reads the curve; drawn sideways it marks an interval. Up and down it scrolls the page. */
  #fingers() {
    const { over } = this.plot;
    over.style.touchAction = "pan-y";
    let start = null;
    const at = (event) => event.clientX - over.getBoundingClientRect().left;
    over.addEventListener("pointerdown", (event) => {
      if (event.pointerType === "touch") start = at(event);
    });
    over.addEventListener("pointermove", (event) => {
      if (start === null || event.pointerType !== "touch") return;
      const [left, right] = [Math.min(start, at(event)), Math.max(start, at(event))];
      this.plot.setCursor({ left: at(event), top: 10 });
      this.plot.setSelect({ left, width: right - left, top: 0, height: over.clientHeight }, false);
    });
    over.addEventListener("pointerup", (event) => {
      if (start !== null && event.pointerType === "touch") this.#selected(this.plot);
      start = null;
    });
    over.addEventListener("pointercancel", () => {
      start = null;
      this.plot.setSelect({ left: 0, width: 0, top: 0, height: 0 }, false);
    });
  }

  #key(event) {
    const last = this.positions.length - 1;
    const start = this.place ?? Math.round(last / 2);
    const steps = { ...STEPS, Home: -last, End: last };
    if (event.key in steps) {
      event.preventDefault();
      const pace = event.shiftKey ? 10 : 1;
      const place = Math.min(last, Math.max(0, start + steps[event.key] * pace));
      this.plot.setCursor({ left: this.plot.valToPos(this.positions[place], "x"), top: 10 });
      announce(this.readout.textContent);
    } else if (event.key.toLowerCase() === "i" && this.place !== undefined && !event.ctrlKey && !event.metaKey) {
      const here = this.positions[this.place];
      if (this.begun === undefined) {
        this.begun = here;
        announce(`Interval begins at ${short(here)} ångström`);
      } else {
        const from = this.begun;
        this.begun = undefined;
        if (from !== here) this.onRegion(from, here);
      }
      this.#moved(this.plot);
    } else if (event.key === "Escape") {
      this.begun = undefined;
      this.#rest();
    }
  }

  /** Where a layer lies on the line: one that reaches over its end goes on at the other. */
  #parts({ lower, upper }) {
    const shifts = [-this.length, 0, this.length];
    return shifts.map((shift) => [Math.max(0, lower + shift), Math.min(this.length, upper + shift)]).filter(([from, to]) => to > from);
  }

  #strip(plot, from, to, fillStyle) {
    const { top, height } = plot.bbox;
    const left = plot.valToPos(Math.max(from, 0), "x", true);
    const right = plot.valToPos(Math.min(to, this.length), "x", true);
    plot.ctx.fillStyle = fillStyle;
    plot.ctx.fillRect(left, top, right - left, height);
  }

  /** Under the curve: the strips of intervals, and of the layer that is marked. */
  #under(plot) {
    const { ctx } = plot;
    ctx.save();
    this.intervals.forEach((one, place) => this.#strip(plot, one.from, one.to, colour(place === this.marked.interval ? "--interval-on" : "--interval")));
    if (this.marked.layer !== null && this.layers[this.marked.layer]) {
      for (const [from, to] of this.#parts(this.layers[this.marked.layer])) this.#strip(plot, from, to, colour("--layer-on"));
    }
    ctx.restore();
  }

  /** Over the curve: a foot line under each layer, its half width, its number. */
  #over(plot) {
    const { ctx, bbox } = plot;
    const ratio = devicePixelRatio;
    ctx.save();
    ctx.font = `${Math.round(12 * ratio)}px system-ui, sans-serif`;
    ctx.textAlign = "center";
    ctx.textBaseline = "bottom";
    this.layers.forEach((layer, place) => {
      const on = place === this.marked.layer;
      ctx.strokeStyle = ctx.fillStyle = colour(on ? "--accent" : "--soft");
      ctx.lineWidth = (on ? 3 : 1.5) * ratio;
      const foot = bbox.top + bbox.height - 5 * ratio;
      for (const [from, to] of this.#parts(layer)) {
        const [left, right] = [plot.valToPos(from, "x", true), plot.valToPos(to, "x", true)];
        ctx.beginPath();
        ctx.moveTo(left + 2 * ratio, foot);
        ctx.lineTo(right - 2 * ratio, foot);
        ctx.stroke();
      }
      for (const shift of [-this.length, 0, this.length]) {
        const at = layer.position + shift;
        if (at < -1e-9 || at > this.length + 1e-9) continue;
        const x = Math.min(bbox.left + bbox.width - 6 * ratio, Math.max(bbox.left + 6 * ratio, plot.valToPos(at, "x", true)));
        ctx.fillText(String(layer.layer), x, foot - 3 * ratio);
      }
    });
    ctx.restore();
  }
}
