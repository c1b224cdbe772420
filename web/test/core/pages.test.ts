import assert from "node:assert/strict";
import { test } from "node:test";
import type { RecordSummary } from "../../src/api/types.ts";
import { dutOf, offsets, read } from "../../src/core/draft.ts";
import { spread, timeTick } from "../../src/core/labels.ts";
import { EVERYTHING, matching, namesOf } from "../../src/core/records.ts";
import { type Route, link, parse } from "../../src/core/route.ts";

const ID = "019ad6ac-1c00-7abc-8def-9f3ac1d2e4b5";

test("every place has an address that leads back to it", () => {
  const routes: Route[] = [
    { view: "bench" },
    { view: "sequence" },
    { view: "hand" },
    { view: "calibration" },
    { view: "records" },
    { view: "record", id: ID },
    { view: "compare", groups: [{ name: "", ids: [ID, ID.replace("0", "1")] }] },
    { view: "compare", groups: [{ name: "K: cold, 5/6", ids: [ID] }, { name: "M;1", ids: [ID.replace("0", "1")] }] },
  ];
  for (const route of routes) assert.deepEqual(parse(link(route)), route);
});

test("an address that is none leads to the nearest page", () => {
  assert.deepEqual(parse("#/record/../../etc"), { view: "records" });
  assert.deepEqual(parse("#/compare/x,y"), { view: "records" });
  assert.deepEqual(parse("#/elsewhere"), { view: "bench" });
});

test("a finding's place is found in the text, with characters of any width", () => {
  const text = '{\n  "note": "µ🙂",  "x": 1\n}';
  const column = Array.from('  "note": "µ🙂",  "x": ').length + 1;
  const place = { line: 2, column, excerpt: "", caret: 0, width: 1 };
  const [from, to] = offsets(text, place);
  assert.equal(text.slice(from, to), "1");
});

test("a draft that cannot be read is blank, and the device's label is found where there is one", () => {
  assert.equal(read("{broken").text, "");
  assert.equal(read(null).text, "");
  assert.equal(dutOf('{"dut": {"label": "K-01"}, "steps": [{"label": "x"}]}'), "K-01");
  assert.equal(dutOf('{"steps": [{"label": "x"}]}'), "");
});

test("labels keep their distance and stay between the ends", () => {
  const placed = spread([50, 52, 54, 200], 15, 10, 210);
  const sorted = [...placed].sort((a, b) => a - b);
  sorted.slice(1).forEach((y, index) => assert.ok(y - (sorted[index] ?? 0) >= 15 - 1e-9));
  assert.ok(Math.min(...placed) >= 10 && Math.max(...placed) <= 210);
});

test("ticks of time are in the unit a person counts in", () => {
  const cases: [number, number, string][] = [[0.05, 0.01, "0.05 s"], [90, 15, "90 s"], [1800, 600, "30 min"], [5400, 1800, "1:30 h"], [21_600, 7200, "6 h"], [24_620, 10, "6:50:20 h"], [24_620.25, 0.05, "6:50:20.25 h"], [1230, 10, "20:30 min"]];
  for (const [seconds, distance, text] of cases) assert.equal(timeTick(seconds, distance), text);
});

test("records are found by device, by label and by how they ended", () => {
  const record = (dut: string, labels: string[], how: string | null): RecordSummary =>
    ({ dut, labels, ending: how === null ? null : { how } }) as RecordSummary;
  const all = [record("K-01", ["settle", "discharge"], "finished"), record("M-01", ["pulse"], "tripped"), record("K-02", [], null)];
  const duts = (chosen: object): string[] => matching(all, { ...EVERYTHING, ...chosen }).map(({ dut }) => dut);
  assert.deepEqual(duts({}), ["K-01", "M-01", "K-02"]);
  assert.deepEqual(duts({ dut: "k-" }), ["K-01", "K-02"]);
  assert.deepEqual(duts({ label: "pulse" }), ["M-01"]);
  assert.deepEqual(duts({ ending: "finished" }), ["K-01"]);
});

test("records of the same device are told apart", () => {
  assert.deepEqual(namesOf([{ dut: "K-01" }, { dut: "M-01" }, { dut: "K-01" }]), ["K-01 (1)", "M-01", "K-01 (2)"]);
});
