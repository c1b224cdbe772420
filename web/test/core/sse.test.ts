import assert from "node:assert/strict";
import { test } from "node:test";
import { Parser } from "../../src/core/sse.ts";

const STREAM = 'id: 7\nevent: sink\ndata: {"a":1}\n\n: still here\n\nid: 8\nevent: run\ndata: one\ndata: two\n\n';

test("messages come out whole, however the text is cut", () => {
  const wanted = [
    { id: "7", event: "sink", data: '{"a":1}' },
    { id: "8", event: "run", data: "one\ntwo" },
  ];
  for (let size = 1; size <= STREAM.length; size += 1) {
    const parser = new Parser();
    const found = [];
    for (let at = 0; at < STREAM.length; at += size) found.push(...parser.take(STREAM.slice(at, at + size)));
    assert.deepEqual(found, wanted, `in pieces of ${size}`);
  }
});

test("lines may end in any of the three ways", () => {
  for (const end of ["\n", "\r\n", "\r"]) {
    const found = new Parser().take(`${STREAM.replaceAll("\n", end)}x`);
    assert.equal(found.length, 2, JSON.stringify(end));
  }
});

test("an id holds for what comes after it without one", () => {
  const found = new Parser().take("id: 3\ndata: a\n\ndata: b\n\n");
  assert.deepEqual(found.map(({ id }) => id), ["3", "3"]);
});

test("comments and events without data are no messages", () => {
  assert.deepEqual(new Parser().take(": x\n\nevent: sink\n\nretry: 1000\n\n"), []);
});
