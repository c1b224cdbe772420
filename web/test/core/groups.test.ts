import assert from "node:assert/strict";
import { test } from "node:test";
import type { Compared, Difference, Group } from "../../src/api/types.ts";
import * as groups from "../../src/core/groups.ts";

const record = (id: string, dut: string, title = "Overnight", sink = "left") => ({ id, dut, title, sink });

test("devices are of one kind when their labels differ by the number alone", () => {
  const cases = [["K-01", "K"], ["K-12", "K"], ["bench supply 2", "bench supply"], ["M_3", "M"], ["17", "17"], ["K2a", "K2a"]];
  for (const [dut, kind] of cases) assert.equal(groups.kindOf(dut ?? ""), kind);
});

test("records are grouped by the names they were given, in order", () => {
  const made = groups.grouped([["1", "M"], ["2", "K"], ["3", "M"]]);
  assert.deepEqual(made, [{ name: "M", ids: ["1", "3"] }, { name: "K", ids: ["2"] }]);
});

test("a device that is in a group twice, and sequences that differ, are named", () => {
  const all = [record("1", "K-01"), record("2", "K-01"), record("3", "K-02", "Pulses")];
  const found = groups.cautions([{ name: "K", ids: ["1", "2", "3"] }], all);
  assert.equal(found.length, 2);
  assert.match(found[0] ?? "", /more than one record of K-01:/);
  assert.match(found[1] ?? "", /2 sequences/);
  assert.deepEqual(groups.cautions([{ name: "K", ids: ["1", "3"] }], [all[0]!, record("3", "K-02")]), []);
});

/** M less K. */
const difference = (low: number, high: number, probability: number): Difference => ({
  from: "K",
  of: "M",
  difference: (low + high) / 2,
  standard_error: (high - low) / 5,
  degrees_of_freedom: 3.7,
  interval: [low, high],
  probability,
  measurement: 0.05,
});

test("a difference is shown where its interval leaves zero out, and told with its least and its most", () => {
  const higher = groups.verdictOf(difference(0.041, 0.203, 0.0083), "Ah");
  assert.ok(higher.shown);
  assert.equal(higher.headline, "M is higher than K by 0.122\u00a0Ah; with 95\u00a0%, by 0.041 to 0.203\u00a0Ah.");
  assert.match(higher.meaning, /about once in 120 comparisons \(p = 0\.008\)/);
  const lower = groups.verdictOf(difference(-0.203, -0.041, 0.0002), "Ah");
  assert.equal(lower.headline, "M is lower than K by 0.122\u00a0Ah; with 95\u00a0%, by 0.041 to 0.203\u00a0Ah.");
  assert.match(lower.meaning, /less than once in 1000/);
});

test("where the interval holds zero nothing is shown, and it is not called the same", () => {
  const { shown, headline, meaning } = groups.verdictOf(difference(-0.05, 0.09, 0.44), "Ah");
  assert.ok(!shown);
  assert.equal(headline, "No difference between M and K is shown.");
  assert.match(meaning, /anything from \u22120\.050 to 0\.090\u00a0Ah/);
  assert.match(meaning, /in 44 of 100 comparisons/);
  assert.doesNotMatch(headline + meaning, /same|equal/);
});

test("what measuring hides is told where it is as large as the difference, and whether it cancels", () => {
  const small = difference(0.01, 0.05, 0.02);
  assert.match(groups.hiddenOf(small, "Ah", true), /cancels/);
  assert.match(groups.hiddenOf(small, "Ah", false), /more than one sink/);
  assert.equal(groups.hiddenOf(difference(0.4, 0.6, 0.001), "Ah", false), "");
});

test("a value has no more digits than measuring bears, and one, however little it spreads", () => {
  const one = { ...group("K", [3, 3]), mean: 0.10657005, interval: [0.1065699, 0.1065702] as [number, number], measurement: 0.0008 };
  assert.equal(groups.meanOf(one, "Ah"), "0.106570\u00a0Ah");
  assert.equal(groups.intervalOf(one.interval, one.measurement, "Ah"), "0.106570 to 0.106570\u00a0Ah");
  assert.equal(groups.intervalOf(one.interval, null, "Ah"), "0.10656990 to 0.10657020\u00a0Ah");
});

test("what the values cannot tell is said once, with its groups", () => {
  const noted = (name: string) => ({ ...group(name, [1]), notes: ["one value"] });
  const compared = { name: "capacity", label: null, unit: "Ah", groups: [noted("K"), noted("M")], differences: [] };
  assert.deepEqual(groups.notesOf(compared), ["K, M: one value"]);
});

const group = (name: string, values: number[]): Group => ({
  name,
  values: values.map((value, index) => [String(index), value]),
  mean: 3,
  standard_deviation: values.length > 1 ? 0.1 : null,
  interval: values.length > 1 ? [2.75, 3.25] : null,
  measurement: null,
  outliers: [],
  notes: [],
});

test("why two groups are not put against each other is said", () => {
  const compared = (all: Group[], differences: Difference[] = []): Compared => ({ name: "capacity", label: null, unit: "Ah", groups: all, differences });
  assert.match(groups.unableOf(compared([group("K", [3, 3.1]), group("M", [3])])), /^One record in M:/);
  assert.match(groups.unableOf(compared([group("K", [3, 3.1])])), /^Only group K/);
  assert.match(groups.unableOf(compared([group("K", [3, 3]), group("M", [3, 3])])), /do not spread/);
  assert.equal(groups.unableOf(compared([group("K", [3, 3.1]), group("M", [3, 3.2])], [difference(-1, 1, 0.5)])), "");
  assert.equal(groups.meanOf(group("K", [3, 3.1]), "Ah"), "3.00\u00a0Ah");
  assert.equal(groups.meanOf(group("K", [3]), "Ah"), "3.0000\u00a0Ah");
});
