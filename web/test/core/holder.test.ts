import assert from "node:assert/strict";
import { type TestContext, test } from "node:test";
import { type Held, Holder } from "../../src/core/holder.ts";

const INTERVAL_MS = 8_000;
const ATTENDED_MS = 60_000;

function held(t: TestContext, renew: () => Promise<unknown> = () => Promise.resolve()) {
  t.mock.timers.enable({ apis: ["setInterval", "Date"], now: 1_000_000 });
  const asked: number[] = [];
  const states: Held[] = [];
  const holder = new Holder({
    interval_ms: INTERVAL_MS,
    attended_ms: ATTENDED_MS,
    renew: () => {
      asked.push(Date.now());
      return renew();
    },
    changed: (state) => {
      if (states.at(-1) !== state) states.push(state);
    },
  });
  const pass = async (ms: number): Promise<void> => {
    for (let passed = 0; passed < ms; passed += 250) {
      t.mock.timers.tick(250);
      await new Promise((resolve) => setImmediate(resolve));
    }
  };
  return { holder, asked, states, pass };
}

test("what is held is asked for several times within its interval", async (t) => {
  const { holder, asked, states, pass } = held(t);
  await pass(40_000);
  const apart = asked.slice(1).map((at, index) => at - (asked[index] ?? 0));
  assert.ok(apart.length >= 15 && apart.every((ms) => ms <= INTERVAL_MS / 3), apart.join(", "));
  assert.deepEqual(states, ["held"]);
  holder.letGo();
});

test("without a touch it stops asking, and a touch goes on", async (t) => {
  const { holder, asked, states, pass } = held(t);
  await pass(50_000);
  holder.touch();
  await pass(50_000);
  assert.deepEqual(states, ["held"]);
  await pass(20_000);
  assert.deepEqual(states, ["held", "unattended"]);
  const before = asked.length;
  await pass(20_000);
  assert.equal(asked.length, before);
  holder.touch();
  await pass(5_000);
  assert.ok(asked.length > before);
  assert.deepEqual(states, ["held", "unattended", "held"]);
  holder.letGo();
});

test("a daemon that does not answer is told, asked on, and told when it is back", async (t) => {
  let answers = false;
  const { holder, asked, states, pass } = held(t, () => (answers ? Promise.resolve() : Promise.reject(new Error("no answer"))));
  await pass(5_000);
  assert.deepEqual(states, ["held", "lost"]);
  assert.ok(asked.length > 1);
  answers = true;
  await pass(5_000);
  assert.deepEqual(states, ["held", "lost", "held"]);
  holder.letGo();
  const before = asked.length;
  await pass(20_000);
  assert.equal(asked.length, before);
  assert.equal(states.at(-1), "let go");
});
