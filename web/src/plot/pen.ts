// Drawing a trace into a plot: a thin line for the mean, a shade from the least to the largest
// value of each stretch, so that a dip of 40 ms in twelve hours is seen.
//
// A shade is filled in rectangles of whole pixels, one after the other. As one path of a thousand
// rectangles with fractions of pixels it took the browser a hundred milliseconds: where the
// noise fills the panel, every row of pixels crosses all of them.

import type uPlot from "uplot";
import { type Quantity, type Trace, firstFrom } from "../core/curve.ts";

export interface Stroke {
  colour: string;
  width: number;
  dash: readonly number[];
  shade: string | null;
}

export function drawTrace(plot: uPlot, trace: Trace, quantity: Quantity, stroke: Stroke): void {
  const { ctx } = plot;
  const { left, top, width, height } = plot.bbox;
  const scale = devicePixelRatio;
  const column = trace.columns[quantity];
  const [low, high] = [plot.scales["x"]?.min ?? 0, plot.scales["x"]?.max ?? 0];
  const from = Math.max(0, firstFrom(trace.x, low) - 1);
  const to = Math.min(trace.x.length - 1, firstFrom(trace.x, high));
  const x = (index: number): number => plot.valToPos(trace.x[index] ?? 0, "x", true);
  const y = (value: number): number => plot.valToPos(value, "y", true);

  ctx.save();
  ctx.beginPath();
  ctx.rect(left, top, width, height);
  ctx.clip();
  if (stroke.shade !== null) {
    ctx.fillStyle = stroke.shade;
    for (let index = from; index <= to; index += 1) {
      const [least, largest] = [column.min[index], column.max[index]];
      if (least === null || largest === null || least === undefined || largest === undefined) continue;
      const [begin, upper] = [Math.round(x(index)), Math.round(y(largest))];
      const end = index < to ? Math.round(x(index + 1)) : begin;
      ctx.fillRect(begin, upper, Math.max(1, end - begin), Math.max(1, Math.round(y(least)) - upper));
    }
  }
  ctx.strokeStyle = stroke.colour;
  ctx.lineWidth = stroke.width * scale;
  ctx.lineJoin = "bevel";
  ctx.setLineDash(stroke.dash.map((length) => length * scale));
  ctx.beginPath();
  let broken = true;
  for (let index = from; index <= to; index += 1) {
    const value = column.mean[index];
    if (value === null || value === undefined) {
      broken = true;
      continue;
    }
    if (broken) ctx.moveTo(x(index), y(value));
    else ctx.lineTo(x(index), y(value));
    broken = false;
  }
  ctx.stroke();
  ctx.restore();
}

/** The last visible point of a trace; null if there is none. */
export function lastVisible(plot: uPlot, trace: Trace, quantity: Quantity): { x: number; value: number } | null {
  const { mean } = trace.columns[quantity];
  const high = plot.scales["x"]?.max ?? 0;
  let index = Math.min(trace.x.length - 1, firstFrom(trace.x, high));
  while (index >= 0 && (mean[index] === null || mean[index] === undefined)) index -= 1;
  const [x, value] = [trace.x[index], mean[index]];
  return x === undefined || value === undefined || value === null ? null : { x: Math.min(x, high), value };
}
