import assert from "node:assert/strict";
import { test } from "node:test";
import * as format from "../../src/core/format.ts";

const plain = (text: string): string => text.replaceAll("\u00a0", " ").replaceAll("\u2212", "-");

test("every quantity has its unit, and what is unknown is no number", () => {
  assert.equal(plain(format.volts(3.61249)), "3.612 V");
  assert.equal(plain(format.amperes(0.64)), "0.640 A");
  assert.equal(plain(format.amperes(0.004)), "4.0 mA");
  assert.equal(plain(format.amperes(0.0996)), "0.100 A");
  assert.equal(plain(format.degrees(-3.25)), "-3.3 °C");
  for (const unknown of [null, undefined, NaN, Infinity]) assert.equal(format.volts(unknown), format.UNKNOWN);
});

test("a value just beyond its limit is told from it", () => {
  assert.deepEqual(format.toldApart(3.99981, 4, "V").map(plain), ["3.9998 V", "4.0000 V"]);
  assert.deepEqual(format.toldApart(2.4, 2.5, "V").map(plain), ["2.400 V", "2.500 V"]);
});

test("nothing is minus zero", () => {
  assert.equal(plain(format.volts(-0.0001)), "0.000 V");
  assert.equal(plain(format.amperes(-0.00001)), "0.0 mA");
});

test("lengths of time are told in their two largest units", () => {
  const cases: [number, string][] = [
    [0.0012, "1.2 ms"],
    [0.04, "40 ms"],
    [2, "2.00 s"],
    [12.34, "12.3 s"],
    [60, "1 min 00 s"],
    [59.97, "1 min 00 s"],
    [3599.6, "1 h 00 min"],
    [20_497, "5 h 41 min"],
    [90_000, "1 d 1 h"],
    [-75, "-1 min 15 s"],
  ];
  for (const [seconds, text] of cases) assert.equal(plain(format.duration(seconds)), text);
});

test("significant digits carry over without an exponent", () => {
  assert.equal(plain(format.significant(0, 3)), "0");
  assert.equal(plain(format.significant(0.0451236, 3)), "0.0451");
  assert.equal(plain(format.significant(-1234.5, 3)), "-1235");
});

test("the expected end names the day only where it is another", () => {
  const at = new Date(2026, 11, 1, 22, 15, 0).toISOString();
  assert.equal(format.expectedEnd(at, 600, 1200), "22:25");
  assert.equal(format.expectedEnd(at, 0, 6 * 3600), "2026-12-02 04:15");
  assert.equal(format.expectedEnd(at, 1200, 600), "");
});

test("an interlock without a value says whether it has been touched", () => {
  const margin = { unit: "V", value: 2.6, worst_value: 2.55, threshold: 2.5, nearness: 0.9, worst_nearness: 0.95 };
  assert.equal(
    plain(format.standing({ ...margin, interlock: "undervoltage" })),
    "2.600 V of 2.500 V; worst 95 %",
  );
  const sensor = { ...margin, interlock: "sensor_fault", unit: "s", value: 0, threshold: 0 };
  assert.equal(format.standing({ ...sensor, worst_nearness: 0 }), "none so far");
  assert.equal(format.standing({ ...sensor, worst_nearness: 1 }), "faulty");
});
