// One panel of a plot: axes, lines with their labels at their ends, marks of what happened.
// uPlot gives axes, scales, the hairline and the drag; what a printed plot looks like is drawn
// here.

import uPlot from "uplot";
import { type Against, type Quantity, type Range, type Trace, extent, roomy } from "../core/curve.ts";
import { TIME_STEPS, spread, timeTick } from "../core/labels.ts";
import { fixed } from "../core/format.ts";
import { type Ink } from "./ink.ts";
import { type Stroke, drawTrace, lastVisible } from "./pen.ts";

export interface Mark {
  /** Where on the x axis. */
  x: number;
  /** Its number in the list below the plot. */
  number: number;
  grave: boolean;
}

export interface Label {
  from: number;
  to: number;
  text: string;
}

/** All that is drawn. */
export interface Drawing {
  against: Against;
  traces: readonly Trace[];
  /** Whether the stretch from least to largest is shaded; with several traces it would hide. */
  shaded: boolean;
  /** Drawn behind them: what the rehearsal predicted. */
  behind: readonly Trace[];
  labels: readonly Label[];
  marks: readonly Mark[];
}

export const NOTHING: Drawing = { against: "time", traces: [], shaded: true, behind: [], labels: [], marks: [] };

export interface PanelSpec {
  quantity: Quantity;
  /** What stands above the axis, as `voltage / V`. */
  axis: string;
  height: number;
  /** The least height of the axis, so that noise is not drawn as a mountain. */
  least: number;
  first: boolean;
  last: boolean;
}

/** Line styles of several records: ink only, told apart by their dashes. */
const DASHES: readonly (readonly number[])[] = [[], [7, 3], [2, 3], [9, 3, 2, 3], [12, 4], [4, 2, 1, 2]];
/** A whole number: uPlot scales no other to the screen. */
const TEXT_PX = 13;
const LINE_PX = 15;
/** A line that ends so far before the right edge has its name inside the plot. */
const INSIDE_PX = 80;

export class Panel {
  readonly plot: uPlot;
  drawing: Drawing = NOTHING;
  /** The x axis as it is shown. */
  range: Range = { from: 0, to: 1 };

  constructor(
    readonly spec: PanelSpec,
    parent: HTMLElement,
    width: number,
    private ink: Ink,
    sync: string,
    on: { zoom: (range: Range) => void; cursor: (x: number | null) => void },
  ) {
    this.plot = new uPlot(
      {
        width,
        height: spec.height,
        legend: { show: false },
        padding: [spec.first ? 40 : 20, width < 500 ? 14 : 92, spec.last ? 0 : -6, 0],
        scales: {
          x: { time: false, range: () => [this.range.from, this.range.to] },
          y: { range: () => this.#height() },
        },
        axes: [
          {
            show: true,
            size: spec.last ? 44 : 8,
            label: "",
            labelSize: 0,
            stroke: () => this.ink.line,
            grid: { show: false },
            ticks: { stroke: () => this.ink.line, width: 1, size: 5 },
            border: { show: true, stroke: () => this.ink.line, width: 1 },
            font: `${TEXT_PX}px ${ink.font}`,
            space: width < 500 ? 62 : 84,
            splits: (plot, _axis, min, max, step, space) =>
              this.drawing.against === "time"
                ? ticks(min, max, timeStep((max - min) / Math.max(1, plot.bbox.width / devicePixelRatio), space || 80))
                : ticks(min, max, step),
            values: (_plot, splits, _axis, _space, step) => (spec.last ? this.#values(splits, step) : splits.map(() => "")),
          },
          {
            size: width < 500 ? 46 : 58,
            stroke: () => this.ink.line,
            grid: { show: false },
            ticks: { stroke: () => this.ink.line, width: 1, size: 5 },
            border: { show: true, stroke: () => this.ink.line, width: 1 },
            font: `${TEXT_PX}px ${ink.font}`,
            space: 34,
            values: (_plot, splits, _axis, _space, step) => splits.map((value) => fixed(value, decimals(step))),
          },
        ],
        cursor: {
          points: { show: false },
          y: false,
          drag: { x: true, y: false, setScale: false, dist: 6 },
          sync: { key: sync, setSeries: false, scales: ["x", null] },
        },
        series: [{}, { paths: () => null, points: { show: false } }],
        hooks: {
          drawAxes: [() => this.#under()],
          draw: [() => this.#over()],
          setSelect: [
            (plot) => {
              const { left, width: wide } = plot.select;
              if (wide < 6) return;
              const range = { from: plot.posToVal(left, "x"), to: plot.posToVal(left + wide, "x") };
              plot.setSelect({ left: 0, top: 0, width: 0, height: 0 }, false);
              on.zoom(range);
            },
          ],
          setCursor: [
            (plot) => {
              const { left } = plot.cursor;
              on.cursor(left === undefined || left < 0 ? null : plot.posToVal(left, "x"));
            },
          ],
        },
      },
      [[0, 1], [null, null]],
      parent,
    );
  }

  show(drawing: Drawing, range: Range): void {
    this.drawing = drawing;
    this.range = range.to > range.from ? range : { from: range.from, to: range.from + 1 };
    this.plot.setData([[this.range.from, this.range.to], [null, null]], true);
  }

  repaint(ink: Ink): void {
    this.ink = ink;
    this.plot.redraw(false, true);
  }

  #height(): [number, number] {
    const all = [...this.drawing.traces, ...this.drawing.behind];
    return roomy(extent(all, this.spec.quantity, this.range), this.spec.least);
  }

  #values(splits: number[], step: number): string[] {
    if (this.drawing.against === "charge") return splits.map((value) => fixed(value, decimals(step)));
    const distance = splits.length > 1 ? (splits[1] ?? 0) - (splits[0] ?? 0) : step;
    return splits.map((value) => timeTick(value, distance));
  }

  /** What stands behind the measurement. */
  #under(): void {
    const { ctx, bbox } = this.plot;
    const scale = devicePixelRatio;
    const { ink, spec } = this;
    ctx.save();
    ctx.lineWidth = scale * 0.75;
    ctx.strokeStyle = ink.rule;
    ctx.setLineDash([scale, 3 * scale]);
    for (const label of this.drawing.labels) {
      if (label.from <= this.range.from || label.from >= this.range.to) continue;
      this.#upright(label.from, bbox.top - (spec.first ? 18 * scale : 0));
    }
    ctx.restore();
    for (const trace of this.drawing.behind) {
      const stroke: Stroke = { colour: ink.faint, width: 1, dash: [5, 3], shade: null };
      drawTrace(this.plot, trace, spec.quantity, stroke);
    }
  }

  /** The measurement, and the words. */
  #over(): void {
    const { ink, spec } = this;
    this.drawing.traces.forEach((trace, index) => {
      const dash = DASHES[index % DASHES.length] ?? [];
      const stroke: Stroke = { colour: ink.line, width: 1.2, dash, shade: this.drawing.shaded ? ink.shade : null };
      drawTrace(this.plot, trace, spec.quantity, stroke);
    });
    this.#marks();
    this.#words();
  }

  #upright(x: number, top: number): void {
    const { ctx, bbox } = this.plot;
    const at = Math.round(this.plot.valToPos(x, "x", true)) + 0.5;
    ctx.beginPath();
    ctx.moveTo(at, top);
    ctx.lineTo(at, bbox.top + bbox.height);
    ctx.stroke();
  }

  #marks(): void {
    const { ctx, bbox } = this.plot;
    const scale = devicePixelRatio;
    ctx.save();
    ctx.font = `italic ${TEXT_PX * scale}px ${this.ink.font}`;
    ctx.textAlign = "center";
    ctx.textBaseline = "bottom";
    let free = -Infinity;
    for (const mark of this.drawing.marks) {
      if (mark.x < this.range.from || mark.x > this.range.to) continue;
      const colour = mark.grave ? this.ink.accent : this.ink.faint;
      ctx.strokeStyle = colour;
      ctx.fillStyle = colour;
      ctx.lineWidth = scale * (mark.grave ? 1.2 : 0.75);
      ctx.setLineDash(mark.grave ? [] : [3 * scale, 2 * scale]);
      this.#upright(mark.x, bbox.top);
      const at = this.plot.valToPos(mark.x, "x", true);
      if (!this.spec.first || at < free) continue;
      const text = String(mark.number);
      ctx.fillText(text, at, bbox.top - 2 * scale);
      free = at + ctx.measureText(text).width + 4 * scale;
    }
    ctx.restore();
  }

  #words(): void {
    const { ctx, bbox } = this.plot;
    const scale = devicePixelRatio;
    const { ink, spec, drawing } = this;
    ctx.save();
    ctx.fillStyle = ink.line;
    ctx.textBaseline = "alphabetic";
    ctx.font = `italic ${TEXT_PX * scale}px ${ink.font}`;
    ctx.textAlign = "left";
    ctx.fillText(spec.axis, 2 * scale, bbox.top - 7 * scale);
    if (spec.first) this.#stretches();
    if (spec.last) {
      ctx.textAlign = "right";
      const what = drawing.against === "time" ? "time since the start" : "charge / Ah";
      ctx.fillText(what, bbox.left + bbox.width, bbox.top + bbox.height + 38 * scale);
    }
    this.#ends();
    ctx.restore();
  }

  /** The steps' labels along the upper edge, where there is room for them. */
  #stretches(): void {
    const { ctx, bbox } = this.plot;
    const scale = devicePixelRatio;
    ctx.textAlign = "center";
    ctx.fillStyle = this.ink.faint;
    for (const { from, to, text } of this.drawing.labels) {
      const left = this.plot.valToPos(Math.max(from, this.range.from), "x", true);
      const right = this.plot.valToPos(Math.min(to, this.range.to), "x", true);
      if (right - left < ctx.measureText(text).width + 8 * scale) continue;
      ctx.fillText(text, (left + right) / 2, bbox.top - 20 * scale);
    }
  }

  /** A line's name at its right end, instead of a legend. */
  #ends(): void {
    const { drawing, plot, spec } = this;
    const scale = devicePixelRatio;
    const { ctx, bbox } = plot;
    const named = [...drawing.behind, ...drawing.traces].filter(({ label }) => label !== "");
    const all = named.flatMap((trace) => {
      const last = lastVisible(plot, trace, spec.quantity);
      if (last === null) return [];
      return [{ trace, x: plot.valToPos(last.x, "x", true), y: plot.valToPos(last.value, "y", true) }];
    });
    const right = bbox.left + bbox.width;
    const reaches = (end: { x: number }): boolean => right - end.x < INSIDE_PX * scale;
    // A line that ends early has its name where it ends.
    for (const { trace, x, y } of all.filter((end) => !reaches(end))) {
      this.#name(trace);
      ctx.textAlign = "left";
      ctx.fillText(trace.label, x + 5 * scale, Math.max(y - 6 * scale, bbox.top + 12 * scale));
    }
    const ends = all.filter(reaches);
    if (ends.length === 0) return;
    const bottom = bbox.top + bbox.height - 2 * scale;
    const places = spread(
      ends.map(({ y }) => y + 4 * scale),
      LINE_PX * scale,
      bbox.top + 10 * scale,
      bottom,
    );
    // On a narrow screen there is no margin: the names stand inside.
    const isNarrow = plot.width < 500;
    ctx.textAlign = isNarrow ? "right" : "left";
    const x = bbox.left + bbox.width + (isNarrow ? -4 : 6) * scale;
    ends.forEach(({ trace }, index) => {
      this.#name(trace);
      ctx.fillText(trace.label, x, (places[index] ?? 0) - (isNarrow ? 8 * scale : 0));
    });
  }

  /** The pen for a trace's name. */
  #name(trace: Trace): void {
    const { ctx } = this.plot;
    const isBehind = this.drawing.behind.includes(trace);
    ctx.fillStyle = isBehind ? this.ink.faint : this.ink.line;
    ctx.font = `${isBehind ? "italic " : ""}${TEXT_PX * devicePixelRatio}px ${this.ink.font}`;
  }
}

function ticks(min: number, max: number, step: number): number[] {
  const found: number[] = [];
  for (let index = Math.ceil(min / step); index * step <= max + step * 1e-9; index += 1) found.push(index * step);
  return found;
}

/** The distance of ticks that leaves so many pixels between two of them. */
function timeStep(perPixel: number, space: number): number {
  return TIME_STEPS.find((step) => step / perPixel >= space) ?? TIME_STEPS.at(-1) ?? 1;
}

/** The fewest decimals with which steps of a scale are told apart exactly. */
function decimals(step: number): number {
  for (let digits = 0; digits < 6; digits += 1) {
    const scaled = step * 10 ** digits;
    if (Math.abs(scaled - Math.round(scaled)) < 1e-6 * scaled) return digits;
  }
  return 6;
}
