import assert from "node:assert/strict";
import { test } from "node:test";
import { LatestFirst } from "../../src/core/turns.ts";

/** Lets everything go on that can. */
const settled = (): Promise<void> => new Promise((resolve) => setImmediate(resolve));

test("of the questions that wait for one only the latest is asked", async () => {
  const turns = new LatestFirst();
  const asked: string[] = [];
  const answers: ((text: string) => void)[] = [];
  const ask = (name: string): Promise<string | null> =>
    turns.take(() => {
      asked.push(name);
      return new Promise<string>((resolve) => answers.push(resolve));
    });
  const first = ask("first");
  await settled();
  const [second, third] = [ask("second"), ask("third")];
  await settled();
  assert.deepEqual(asked, ["first"]);
  answers[0]?.("one");
  assert.equal(await first, "one");
  assert.equal(await second, null);
  await settled();
  assert.deepEqual(asked, ["first", "third"]);
  answers[1]?.("three");
  assert.equal(await third, "three");
});

test("a question that fails does not fail the next one", async () => {
  const turns = new LatestFirst();
  const first = assert.rejects(turns.take(() => Promise.reject(new Error("no answer"))), /no answer/);
  await settled();
  const second = turns.take(() => Promise.resolve("two"));
  await first;
  assert.equal(await second, "two");
});
