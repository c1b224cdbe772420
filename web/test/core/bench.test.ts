import assert from "node:assert/strict";
import { test } from "node:test";
import type { Run, RunEvent, Sink } from "../../src/api/types.ts";
import * as fold from "../../src/core/bench.ts";

const sink = (name: string, change: Partial<Sink> = {}): Sink => ({
  name,
  at: "2026-12-01T22:15:00Z",
  link: { kind: "simulated", port: "", state: "connected", reason: null, time_factor: 1 },
  limits: { current_a: 3, power_w: 15, voltage_v: 9, temperature_degc: 80 },
  calibrated: false,
  reading: null,
  latched_by: null,
  run: null,
  ...change,
});
const event = (news: RunEvent["news"], change: Partial<RunEvent> = {}): RunEvent => ({
  run: "r",
  sink: "left",
  dut: "K-01",
  at: "2026-12-01T22:15:00Z",
  message: "K-01 on left: something",
  calls_for_person: false,
  news,
  ...change,
});

test("a sink's latest state takes the place of the one before, in the bench's order", () => {
  let bench = fold.asked(fold.EMPTY, { bench: "weir", sinks: [sink("left"), sink("right")] }, []);
  bench = fold.sinkHeard(bench, sink("left", { latched_by: "undervoltage" }));
  assert.deepEqual(bench.sinks.map(({ name }) => name), ["left", "right"]);
  assert.equal(bench.sinks[0]?.latched_by, "undervoltage");
});

test("the latest ended run of each sink is kept", () => {
  const run = (id: string, name: string): Run => ({ id, sink: name, state: "ended" }) as Run;
  const bench = fold.asked(fold.EMPTY, { bench: "weir", sinks: [] }, [run("new", "left"), run("old", "left"), run("r", "right")]);
  assert.equal(bench.ended["left"]?.id, "new");
  assert.equal(bench.ended["right"]?.id, "r");
});

test("a trip is said at once, an ordinary end when there is a pause", () => {
  const tripped = fold.runHeard(fold.EMPTY, "1", event({ ended: { how: "tripped" } }));
  assert.deepEqual(tripped.said.map(({ urgent }) => urgent), [true]);
  assert.equal(tripped.bench.lines[0]?.grave, true);
  const finished = fold.runHeard(fold.EMPTY, "1", event({ ended: { how: "finished" } }));
  assert.deepEqual(finished.said.map(({ urgent }) => urgent), [false]);
});

test("steps are not written into the chronicle and not said", () => {
  const { bench, said } = fold.runHeard(fold.EMPTY, "1", event({ step: { op: 3, label: "pulse" } }));
  assert.deepEqual([bench.lines.length, said.length], [0, 0]);
});

test("an event that comes twice is written once, and a night stays bounded", () => {
  let { bench } = fold.runHeard(fold.EMPTY, "1", event("began"));
  ({ bench } = fold.runHeard(bench, "1", event("began")));
  assert.equal(bench.lines.length, 1);
  for (let id = 2; id < 5000; id += 1) ({ bench } = fold.runHeard(bench, String(id), event("held")));
  assert.equal(bench.lines.length, fold.LINES_MAX);
  assert.equal(bench.lines[0]?.id, "4999");
});

test("the loss of the daemon is said once, and its return", () => {
  let turn = fold.contactMade(fold.EMPTY);
  assert.equal(turn.said.length, 0);
  turn = fold.contactLost(turn.bench, 1000);
  assert.deepEqual(turn.said.map(({ urgent }) => urgent), [true]);
  turn = fold.contactLost(turn.bench, 2000);
  assert.equal(turn.said.length, 0);
  assert.deepEqual(turn.bench.contact, { state: "lost", since: 1000 });
  turn = fold.contactMade(turn.bench);
  assert.equal(turn.said.length, 1);
  assert.equal(turn.bench.contact.state, "live");
});

test("what a sink does is told in a word", () => {
  assert.equal(fold.standing(sink("left")), "off");
  assert.equal(fold.standing(sink("left", { latched_by: "over_power" })), "tripped: over-power");
  const lost = sink("left", { link: { ...sink("left").link, state: "lost" } });
  assert.equal(fold.standing(lost), "link lost");
});
