import assert from "node:assert/strict";
import { test } from "node:test";
import type { Curve } from "../../src/api/types.ts";
import * as curve from "../../src/core/curve.ts";

/** A curve of given times, with a dip of the least voltage in the middle point. */
function made(times: number[]): Curve {
  const of = (value: number): number[] => times.map(() => value);
  return {
    time_s: times,
    readbacks: of(1),
    charge_ah: times.map((time) => (time === 2 ? null : time / 10)),
    current_a: of(0.64),
    current_min_a: of(0.63),
    current_max_a: of(0.65),
    voltage_v: of(3.6),
    voltage_min_v: times.map((_, index) => (index === Math.floor(times.length / 2) ? 3.1 : 3.59)),
    voltage_max_v: of(3.61),
    temperature_degc: times.map((_, index) => (index === 0 ? null : 30)),
    temperature_max_degc: times.map((_, index) => (index === 0 ? null : 31)),
  };
}

test("charge never falls, also where a counter is missing", () => {
  const trace = curve.traceOf("", made([0, 1, 2, 3]), "charge");
  assert.deepEqual(trace.x, [0, 0.1, 0.1, 0.3]);
});

test("the nearest point is found at, between and beyond the points", () => {
  const x = [0, 1, 2, 4];
  const cases: [number, number][] = [[-5, 0], [0, 0], [0.4, 0], [0.6, 1], [3.1, 3], [9, 3]];
  for (const [at, index] of cases) assert.equal(curve.nearest(x, at), index, String(at));
  assert.equal(curve.nearest([], 1), -1);
});

test("the height of an axis holds the extremes, not only the means", () => {
  const trace = curve.traceOf("", made([0, 1, 2, 3, 4]), "time");
  assert.deepEqual(curve.extent([trace], "voltage", { from: 0, to: 4 }), { from: 3.1, to: 3.61 });
  assert.equal(curve.extent([], "voltage", { from: 0, to: 4 }), null);
});

test("detail takes the place of what it covers and loses nothing beside it", () => {
  const overview = made([0, 10, 20, 30, 40]);
  const joined = curve.spliced(overview, made([12, 14, 16, 18, 20]));
  assert.deepEqual(joined.time_s, [0, 10, 12, 14, 16, 18, 20, 30, 40]);
  for (const column of Object.values(joined)) assert.equal(column.length, 9);
  assert.deepEqual(curve.spliced(overview, made([])), overview);
});

test("zooming and moving stay within the whole", () => {
  const all = { from: 0, to: 100 };
  assert.deepEqual(curve.scaled({ from: 0, to: 100 }, 0.5, all), { from: 25, to: 75 });
  assert.deepEqual(curve.scaled({ from: 0, to: 20 }, 2, all), { from: 0, to: 40 });
  assert.deepEqual(curve.scaled({ from: 40, to: 60 }, 100, all), all);
  assert.deepEqual(curve.shifted({ from: 80, to: 90 }, 5, all), { from: 90, to: 100 });
});

test("a stretch of charge is asked for as the time it took", () => {
  const trace = curve.traceOf("", made([0, 1, 3, 4, 5]), "charge");
  assert.deepEqual(curve.timeOf(trace, { from: 0.15, to: 0.35 }), { from: 1, to: 4 });
});

test("an axis is never without height", () => {
  const [low, high] = curve.roomy({ from: 3, to: 3 }, 0.02);
  assert.ok(high - low >= 0.02 && low < 3 && high > 3);
});
