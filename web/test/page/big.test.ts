// A record of twelve hours at 100 readbacks a second: drawn at once, zoomed at once, and Off is
// not in its way.

import assert from "node:assert/strict";
import { existsSync, rmSync } from "node:fs";
import { join } from "node:path";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { Off, RecordList, Run, Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, picture, sit, until } from "./desk.ts";
import { CAPACITY, NIGHT } from "./sequences.ts";

/** What is aimed at on a quiet machine; one that is loaded may be slower by this factor. What
 * the daemon itself takes in processor time is held without it. */
const LOADED = 10;
const FOLDER = "2026-12-01-200000-left-K-01-night";

let daemon: Daemon;
let id = "";
before(async () => {
  daemon = await Daemon.open(1, (text) => text.replaceAll('fastest = "20 ms"', 'fastest = "10 ms"'));
  await daemon.keepRehearsal(NIGHT, FOLDER);
  id = (await daemon.get<RecordList>("/v1/records")).records.find(({ folder }) => folder === FOLDER)?.id ?? "";
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

/** The whole night stands on the page. */
const DRAWN = 'figure[aria-label$="min"]';
/** How long it takes in the page until something is so, from an action on. */
const timed = (page: Page, act: string, isSo: string): Promise<number> =>
  page.evaluate(
    ([act, isSo]) =>
      new Promise<number>((resolve, reject) => {
        setTimeout(() => reject(new Error(`waited 60 s for ${isSo}`)), 60_000);
        const begun = performance.now();
        (document.querySelector<HTMLElement>(act) as HTMLElement).click();
        const look = (): void => {
          if (document.querySelector(isSo)) resolve(performance.now() - begun);
          else requestAnimationFrame(look);
        };
        requestAnimationFrame(look);
      }),
    [act, isSo] as const,
  );

test("its first picture stands within a second, and a zoom within a fifth of one", async (t) => {
  const { context, page, complaints } = await sit(daemon);
  await page.getByRole("link", { name: "Records" }).click();
  await page.getByRole("link", { name: "K-01", exact: true }).waitFor();
  const before = daemon.processor_s();
  const first = await timed(page, 'a[href*="#/record/"]', DRAWN);
  const drawing = daemon.processor_s() - before;
  // A rehearsal's record is kept without figures: they are worked out now, and are not the zoom's.
  await page.getByRole("heading", { name: "Figures" }).waitFor({ timeout: 60_000 });
  const zooms: number[] = [];
  await page.evaluate(() => {
    for (const button of document.querySelectorAll("button")) button.id ||= `b-${button.textContent ?? ""}`.replaceAll(" ", "");
  });
  const between = daemon.processor_s();
  for (let zoom = 0; zoom < 12; zoom += 1) {
    zooms.push(await timed(page, zoom % 4 === 3 ? "#b-Later" : "#b-Zoomin", "figure:not([aria-busy])"));
  }
  await picture(page, "night-zoomed");
  const zooming = (daemon.processor_s() - between) / zooms.length;
  zooms.push(await timed(page, "#b-Whole", "figure:not([aria-busy])"));
  await picture(page, "night");
  const slowest = Math.max(...zooms);
  const heap = await page.evaluate(() => (performance as unknown as { memory: { usedJSHeapSize: number } }).memory.usedJSHeapSize);
  t.diagnostic(`first picture ${first.toFixed(0)} ms; zooms ${zooms.map((ms) => ms.toFixed(0)).join(", ")} ms; heap ${(heap / 1e6).toFixed(1)} MB; processor time ${(drawing * 1000).toFixed(0)} ms, then ${(zooming * 1000).toFixed(0)} ms a zoom`);
  // The first picture reads the sketch, a zoom one or two segments of the record.
  assert.ok(drawing < 1, `the daemon worked ${drawing} s for the first picture`);
  assert.ok(zooming < 0.2, `the daemon worked ${zooming} s for a zoom`);
  assert.ok(first < 1000 * LOADED, `the first picture took ${first} ms`);
  assert.ok(slowest < 200 * LOADED, `a zoom took ${slowest} ms`);
  assert.deepEqual(complaints, []);
  await context.close();
});

test("Off reaches the sink within 100 ms while the record is drawn from nothing", async (t) => {
  // Nothing is kept or held: the whole record must be read again, on every core.
  const sketch = join(daemon.folder, "records", FOLDER, "sketch");
  assert.ok(existsSync(sketch), "a rehearsal's record is kept with its sketch");
  rmSync(sketch);
  await daemon.kill();
  await daemon.start();
  const run = await daemon.post<Run>("/v1/runs", { sequence: CAPACITY.replace('"rest": "10 min"', '"rest": "1 s"'), sink: "left", dut: "K-02" });
  await until("current", async () => ((await daemon.get<Sink>("/v1/sinks/left")).reading?.current_a ?? 0) > 0.5);
  const { context, page } = await sit(daemon);
  await page.locator(".off-one[data-draws]").waitFor();
  const asked = page.waitForRequest(/\/readings\?/);
  await page.goto(`${daemon.url}/#/record/${id}`);
  await asked;
  const answered = page.waitForResponse(/\/off$/);
  const shown = await timed(page, ".off-one", ".off-answer:not(:empty)");
  const off = (await (await answered).json()) as Off;
  const drawn = await page.locator(DRAWN).count();
  t.diagnostic(`acknowledged by the sink after ${(off.took_s * 1000).toFixed(1)} ms, pressed to shown ${shown.toFixed(0)} ms, ${drawn ? "drawn already" : "not drawn yet"}`);
  assert.ok(off.acknowledged);
  assert.ok(off.took_s < 0.1 * LOADED, `it took ${off.took_s} s`);
  await until("the run's end", async () => (await daemon.get<Run>(`/v1/runs/${run.id}`)).ending?.how === "stopped");
  await page.locator(DRAWN).waitFor();
  await context.close();
});
