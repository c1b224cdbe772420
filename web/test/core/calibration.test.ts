import assert from "node:assert/strict";
import { test } from "node:test";
import type { Calibration, Certificate, CertificateLine } from "../../src/api/types.ts";
import * as calibration from "../../src/core/calibration.ts";

test("setpoints are proposed from the floor to below the top, and read back from any list", () => {
  const text = calibration.proposed(3);
  const points = calibration.setpointsOf(text);
  assert.equal(points.length, 10);
  assert.equal(points[0], "30 mA");
  assert.equal(points.at(-1), "2.7 A");
  assert.deepEqual(calibration.setpointsOf(" 20 mA;1 A,\n\n2 A, "), ["20 mA", "1 A", "2 A"]);
});

test("a meter's reading is understood with its unit and not guessed without", () => {
  const cases: [string, number | null][] = [["498.6 mA", 0.4986], ["3.702V", 3.702], ["12 uA", 0.000012], ["1.5 µV", 0.0000015], ["498.6", null], ["1.2.3 A", null], ["", null]];
  for (const [text, value] of cases) {
    const found = calibration.meterValue(text);
    assert.ok(value === null ? found === null : found !== null && Math.abs(found - value) < 1e-12, `${text}: ${String(found)}`);
  }
});

test("small quantities keep their digits", () => {
  assert.equal(calibration.small(0.0000027, "A"), "2.7\u00a0µA");
  assert.equal(calibration.small(-0.0335, "A"), "\u221233.50\u00a0mA");
  assert.equal(calibration.small(3.7, "V"), "3.7000\u00a0V");
});

const under = (change: Partial<Calibration>): Calibration => ({
  id: "",
  sink: "left",
  certificate: "weir-left",
  verifies: false,
  state: "settling",
  waits_for: "held for 0.4 s, 1 s is the least",
  point: 3,
  points: 10,
  setpoint_a: 0.5,
  nominal: null,
  current_points: 2,
  voltage_points: 2,
  run: null,
  ...change,
});

test("what is to be done now is said in every state", () => {
  assert.equal(calibration.guideOf(under({})), "Point 3 of 10: 0.500\u00a0A nominal. It settles: held for 0.4 s, 1 s is the least.");
  assert.match(calibration.guideOf(under({ state: "settled", waits_for: null })), /Settled: read the meters/);
  assert.match(calibration.guideOf(under({ state: "taken" })), /write the certificate/);
  assert.match(calibration.guideOf(under({ state: "taken", verifies: true })), /judge the certificate/);
  assert.match(calibration.guideOf(under({ state: "ended" })), /can still be finished/);
});

const line: CertificateLine = {
  channel: "current read",
  unit: "A",
  offset: 0.00142,
  offset_uncertainty: 0.00027,
  slope: 1.02026,
  slope_uncertainty: 0.0008,
  points: 3,
  largest_residual: -0.0002,
  outliers: [2],
  range: [0.1, 1.6],
  bent: true,
};

test("a line is told with its uncertainties and what is odd about it", () => {
  const told = calibration.lineOf(line);
  assert.equal(told.offset, "0.00142 ± 0.00027\u00a0A");
  assert.equal(told.slope, "1.02026 ± 0.00080");
  assert.equal(told.residual, "\u2212200.0\u00a0µA");
  for (const note of [/bend/, /farther off than expected: point 2/, /3 points show little/]) assert.match(told.note, note);
});

test("drift is told where the uncertainties do not explain it, and only there", () => {
  const drift = { channel: "current set", at_micro: 1e6, change_micro: 4_000, expanded_micro: 1_500, normalised_change: 2.7, significant: true };
  const of = (drift: Certificate["drift"]): string => calibration.driftOf({ drift } as Certificate);
  assert.equal(of([]), "no earlier one to compare with");
  assert.match(of([{ ...drift, significant: false }]), /no more than/);
  assert.match(of([drift]), /^current set has moved by 4\.00\u00a0mA at 1\.0000\u00a0A/);
});
