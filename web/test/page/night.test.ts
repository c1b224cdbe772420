// A night with eight sinks in time-lapse: the page stays as small as it was. And what it weighs
// when it is loaded for the first time.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { CDPSession, Page } from "playwright-core";
import type { Run, Sink } from "../../src/api/types.ts";
import { Daemon, PHONE, closeBrowser, picture, sit, until } from "./desk.ts";
import { CAPACITY } from "./sequences.ts";

const SINKS = 8;
const FIRST_LOAD_MAX = 150_000;
/** How much the page may grow between the first hours and the morning: less than what it would
 * be if it kept a number of each of the night's readbacks. */
const GROWTH_MAX_MB = 2;

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(1200, (text) => {
    const [head, left] = text.split("[[sink]]");
    const rest = (left ?? "").replaceAll('"200 ms"', '"1 s"');
    const sinks = Array.from({ length: SINKS }, (_, index) =>
      rest.replace('name = "left"', `name = "sink-${index + 1}"`).replace("serial_number = 1", `serial_number = ${index + 1}`).replace("seed = 1", `seed = ${index + 1}`),
    );
    return [head, ...sinks].join("[[sink]]");
  });
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

async function size(cdp: CDPSession): Promise<{ heap_mb: number; nodes: number }> {
  await cdp.send("HeapProfiler.collectGarbage");
  await cdp.send("HeapProfiler.collectGarbage");
  const { usedSize } = await cdp.send("Runtime.getHeapUsage");
  const { nodes } = await cdp.send("Memory.getDOMCounters");
  return { heap_mb: usedSize / 1e6, nodes };
}

const passed = async (hours: number): Promise<void> => {
  await until(`${hours} h to pass`, async () => {
    const { sinks } = await daemon.get<{ sinks: Sink[] }>("/v1/sinks");
    return sinks.every(({ run }) => run !== null && run.elapsed_s > hours * 3600);
  }, 240);
};

test("the first load is light, and nothing is compressed on the way", async (t) => {
  const { context, page } = await sit(daemon);
  const cdp = await context.newCDPSession(page);
  await cdp.send("Network.enable");
  await cdp.send("Network.setCacheDisabled", { cacheDisabled: true });
  const paths = new Map<string, string>();
  let weight = 0;
  cdp.on("Network.requestWillBeSent", ({ requestId, request }) => paths.set(requestId, new URL(request.url).pathname));
  cdp.on("Network.loadingFinished", ({ requestId, encodedDataLength }) => {
    if (!paths.get(requestId)?.startsWith("/v1/")) weight += encodedDataLength;
  });
  await page.reload();
  await page.getByRole("article").first().waitFor();
  await page.evaluate(() => document.fonts.ready);
  t.diagnostic(`${(weight / 1000).toFixed(1)} kB over the wire, headers included`);
  assert.ok(weight > 20_000 && weight < FIRST_LOAD_MAX, `${weight} bytes`);
  await context.close();
});

test("eight sinks over a night leave the page as small as it was", { timeout: 400_000 }, async (t) => {
  const sequence = CAPACITY.replaceAll("0.2 It", "0.08 It").replace('"readback": "200 ms"', '"readback": "1 s"').replace('"at_most": "7 h"', '"at_most": "16 h"').replace('"charge": "3.84 Ah"', '"charge": "3.9 Ah"');
  const runs: Run[] = [];
  for (let sink = 1; sink <= SINKS; sink += 1) {
    runs.push(await daemon.post<Run>("/v1/runs", { sequence, sink: `sink-${sink}`, dut: `K-0${sink}` }));
  }
  const { context, page, complaints } = await sit(daemon, { size: PHONE });
  const cdp = await context.newCDPSession(page);
  await passed(1.5);
  await picture(page, "night-eight-sinks");
  const bench = [await size(cdp)];
  await passed(5);
  bench.push(await size(cdp));
  // The other half of it in front of a curve that grows.
  await page.goto(`${daemon.url}/#/record/${runs[0]?.id ?? ""}`);
  await page.getByRole("figure").and(page.locator("[aria-label]")).waitFor();
  await passed(6);
  const record = [await size(cdp)];
  await passed(10.5);
  record.push(await size(cdp));
  await picture(page, "night-record-phone");
  t.diagnostic(`bench ${told(bench)}; record ${told(record)}`);
  for (const [first, last] of [bench, record]) {
    assert.ok(first && last);
    assert.ok(last.heap_mb - first.heap_mb < GROWTH_MAX_MB, `the heap grew from ${first.heap_mb} to ${last.heap_mb} MB`);
    assert.ok(last.nodes - first.nodes < 2000, `from ${first.nodes} to ${last.nodes} nodes`);
  }
  assert.deepEqual(complaints, []);
  await daemon.post("/v1/off");
  await offButtonsInView(page);
  await context.close();
});

const told = (sizes: { heap_mb: number; nodes: number }[]): string =>
  sizes.map(({ heap_mb, nodes }) => `${heap_mb.toFixed(2)} MB, ${nodes} nodes`).join(" → ");

/** Eight sinks and all of them: every Off is still within the screen. */
async function offButtonsInView(page: Page): Promise<void> {
  const buttons = await page.getByRole("button", { name: /^Off/ }).all();
  assert.equal(buttons.length, SINKS + 1);
  for (const button of buttons) {
    const box = await button.boundingBox();
    assert.ok(box && box.y >= 0 && box.y + box.height <= PHONE.height && box.x >= 0 && box.x + box.width <= PHONE.width);
  }
}
