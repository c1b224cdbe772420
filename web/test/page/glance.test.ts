// A page that nobody looks at: it lets go of the stream, glances at the bench now and then, tells
// of a trip in its title, and misses nothing when it is looked at again. The page's clock is the
// test's: nothing waits for a minute.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, sit, until } from "./desk.ts";
import { CAPACITY, TRIPPING } from "./sequences.ts";

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(500);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

/** Puts the page out of sight, or back: a headless browser shows every page it has. */
const see = (page: Page, state: "hidden" | "visible"): Promise<void> =>
  page.evaluate((state) => {
    Object.defineProperty(document, "visibilityState", { configurable: true, get: () => state });
    document.dispatchEvent(new Event("visibilitychange"));
  }, state);

/** Lets seconds of the page's clock pass while the stream goes on: each time news are waited for,
 * since a stream on which nothing comes for 35 s is taken for dead. */
async function pass(page: Page, seconds: number): Promise<void> {
  const course = page.getByRole("article", { name: "left" }).locator(".course");
  for (let left = seconds; left > 0; left -= 10) {
    await page.clock.runFor(10_000);
    const before = await course.textContent();
    await until("news", async () => {
      await page.clock.runFor(20);
      return (await course.textContent()) !== before;
    });
  }
}

test("a page out of sight glances at the bench, tells of a trip and of a lost daemon in its title, and misses nothing", async () => {
  const { context, page, complaints } = await sit(daemon);
  await page.clock.install();
  const asked: { path: string; after: string | undefined }[] = [];
  page.on("request", (request) => {
    asked.push({ path: new URL(request.url()).pathname, after: request.headers()["last-event-id"] });
  });
  await page.reload();
  await page.getByRole("article").first().waitFor();
  let letGo = 0;
  page.on("requestfailed", (request) => {
    if (request.url().endsWith("/v1/events")) letGo += 1;
  });
  const count = (path: string): number => asked.filter((one) => one.path === path).length;
  await daemon.post("/v1/runs", { sequence: CAPACITY, sink: "left", dut: "K-02" });

  // For a minute it keeps the stream: someone may be back at once.
  await see(page, "hidden");
  await pass(page, 50);
  await see(page, "visible");
  await pass(page, 20);
  assert.equal(letGo, 0);
  const streams = count("/v1/events");
  await see(page, "hidden");
  await pass(page, 50);
  await page.clock.runFor(10_000);
  await until("the stream to be let go", () => Promise.resolve(letGo === 1));
  assert.doesNotMatch(await page.title(), /^!/);

  // Four glances a minute, and no stream.
  const before = count("/v1/sinks");
  await page.clock.runFor(60_000);
  await until("the glances", () => Promise.resolve(count("/v1/sinks") >= before + 4));
  assert.equal(count("/v1/sinks"), before + 4);

  await daemon.post("/v1/off");
  await until("the sink to be free", async () => (await daemon.get<Sink>("/v1/sinks/left")).run === null);
  await daemon.post("/v1/runs", { sequence: TRIPPING, sink: "left", dut: "K-01" });
  await until("the trip", async () => {
    const { latched_by, run } = await daemon.get<Sink>("/v1/sinks/left");
    return latched_by !== null && run === null;
  });
  await page.clock.runFor(15_000);
  await until("the title to tell of the trip", async () => (await page.title()).startsWith("! left tripped"));

  await daemon.kill();
  await page.clock.runFor(15_000);
  await until("the title to tell of the daemon", async () => (await page.title()).startsWith("! no word"));
  await daemon.start();
  await page.clock.runFor(15_000);
  await until("the title to tell that it is back", async () => !(await page.title()).startsWith("! no word"));
  assert.equal(count("/v1/events"), streams);

  // Looked at again, the stream goes on behind the last event: the chronicle has the trip.
  await see(page, "visible");
  await until("the stream again", () => Promise.resolve(count("/v1/events") === streams + 1));
  const again = asked.filter(({ path }) => path === "/v1/events").at(-1);
  assert.ok(Number(again?.after) > 0, `asked with ${String(again?.after)}`);
  await page.clock.runFor(1_000);
  await page.getByRole("article", { name: "left" }).getByText("tripped: undervoltage", { exact: true }).waitFor();
  // What the browser itself writes down of a refused connection is no error of the page.
  assert.deepEqual(complaints.filter((text) => !/ERR_CONNECTION|Failed to load resource/.test(text)), []);
  await context.close();
});
