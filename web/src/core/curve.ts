// Thinned readbacks as something that can be plotted and read off: pure.

import type { Curve } from "../api/types.ts";

export type Against = "time" | "charge";
export type Quantity = "voltage" | "current" | "temperature";

type Cells = (number | null)[];

/** Least, mean and largest of each stretch. */
export interface Column {
  mean: Cells;
  min: Cells;
  max: Cells;
}

/** One curve: the same index belongs to the same stretch of time in every column. */
export interface Trace {
  label: string;
  /** What it is plotted against; never falls. */
  x: number[];
  time: number[];
  charge: Cells;
  columns: Record<Quantity, Column>;
}

export interface Range {
  from: number;
  to: number;
}

export function traceOf(label: string, curve: Curve, against: Against): Trace {
  const charge = curve.charge_ah;
  return {
    label,
    x: against === "time" ? curve.time_s : rising(charge),
    time: curve.time_s,
    charge,
    columns: {
      voltage: { mean: curve.voltage_v, min: curve.voltage_min_v, max: curve.voltage_max_v },
      current: { mean: curve.current_a, min: curve.current_min_a, max: curve.current_max_a },
      // The hottest is what matters; the least of a temperature is nobody's question.
      temperature: {
        mean: curve.temperature_degc,
        min: curve.temperature_degc,
        max: curve.temperature_max_degc,
      },
    },
  };
}

/** Charge that never falls: what is unknown is as before. */
function rising(charge: Cells): number[] {
  let so_far = 0;
  return charge.map((value) => {
    if (value !== null && value > so_far) so_far = value;
    return so_far;
  });
}

/** The first index whose x is not below a value; the length if there is none. */
export function firstFrom(x: readonly number[], value: number): number {
  let [low, high] = [0, x.length];
  while (low < high) {
    const middle = (low + high) >> 1;
    if ((x[middle] ?? Infinity) < value) low = middle + 1;
    else high = middle;
  }
  return low;
}

/** The index nearest to a value; -1 if there is none. */
export function nearest(x: readonly number[], value: number): number {
  const right = firstFrom(x, value);
  const [before, after] = [x[right - 1], x[right]];
  if (before === undefined) return after === undefined ? -1 : right;
  if (after === undefined) return right - 1;
  return value - before <= after - value ? right - 1 : right;
}

/** From the first to the last x of some traces; null if they hold nothing. */
export function whole(traces: readonly Trace[]): Range | null {
  let [from, to] = [Infinity, -Infinity];
  for (const { x } of traces) {
    from = Math.min(from, x[0] ?? Infinity);
    to = Math.max(to, x.at(-1) ?? -Infinity);
  }
  return from <= to ? { from, to } : null;
}

/** The least and the largest value of a quantity in a stretch of x, with the points just outside
 * it, since the line goes on to them. */
export function extent(traces: readonly Trace[], quantity: Quantity, range: Range): Range | null {
  let [low, high] = [Infinity, -Infinity];
  for (const trace of traces) {
    const column = trace.columns[quantity];
    const from = Math.max(0, firstFrom(trace.x, range.from) - 1);
    const to = Math.min(trace.x.length - 1, firstFrom(trace.x, range.to));
    for (let index = from; index <= to; index += 1) {
      const least = column.min[index] ?? column.mean[index];
      const largest = column.max[index] ?? column.mean[index];
      if (least !== null && least !== undefined && least < low) low = least;
      if (largest !== null && largest !== undefined && largest > high) high = largest;
    }
  }
  return low <= high ? { from: low, to: high } : null;
}

/** An axis that holds a stretch of values with a little room, and is never without height. */
export function roomy(range: Range | null, least: number): [number, number] {
  if (!range) return [0, 1];
  const height = Math.max(range.to - range.from, least);
  const middle = (range.from + range.to) / 2;
  return [middle - height * 0.54, middle + height * 0.54];
}

/** The stretch of time that a stretch of x stands for: what to ask the daemon for. */
export function timeOf(trace: Trace, range: Range): Range {
  const last = trace.x.length - 1;
  const from = Math.max(0, firstFrom(trace.x, range.from) - 1);
  const to = Math.min(last, firstFrom(trace.x, range.to));
  return { from: trace.time[from] ?? 0, to: trace.time[to] ?? trace.time[last] ?? 0 };
}

/** A part of a range around its middle, or a range as much larger, inside of another. */
export function scaled(range: Range, factor: number, bounds: Range): Range {
  const middle = (range.from + range.to) / 2;
  const half = ((range.to - range.from) / 2) * factor;
  return inside({ from: middle - half, to: middle + half }, bounds);
}

/** A range moved by a share of itself, inside of another. */
export function shifted(range: Range, share: number, bounds: Range): Range {
  const by = (range.to - range.from) * share;
  return inside({ from: range.from + by, to: range.to + by }, bounds);
}

function inside(range: Range, bounds: Range): Range {
  const length = Math.min(range.to - range.from, bounds.to - bounds.from);
  const from = Math.min(Math.max(range.from, bounds.from), bounds.to - length);
  return { from, to: from + length };
}

/** A curve of the whole with a stretch of it in detail. */
export function spliced(overview: Curve, detail: Curve): Curve {
  const [from, to] = [detail.time_s[0], detail.time_s.at(-1)];
  if (from === undefined || to === undefined) return overview;
  const before = firstFrom(overview.time_s, from);
  let after = firstFrom(overview.time_s, to);
  if (overview.time_s[after] === to) after += 1;
  const joined = <T>(all: readonly T[], part: readonly T[]): T[] => [
    ...all.slice(0, before),
    ...part,
    ...all.slice(after),
  ];
  return {
    time_s: joined(overview.time_s, detail.time_s),
    readbacks: joined(overview.readbacks, detail.readbacks),
    charge_ah: joined(overview.charge_ah, detail.charge_ah),
    current_a: joined(overview.current_a, detail.current_a),
    current_min_a: joined(overview.current_min_a, detail.current_min_a),
    current_max_a: joined(overview.current_max_a, detail.current_max_a),
    voltage_v: joined(overview.voltage_v, detail.voltage_v),
    voltage_min_v: joined(overview.voltage_min_v, detail.voltage_min_v),
    voltage_max_v: joined(overview.voltage_max_v, detail.voltage_max_v),
    temperature_degc: joined(overview.temperature_degc, detail.temperature_degc),
    temperature_max_degc: joined(overview.temperature_max_degc, detail.temperature_max_degc),
  };
}
