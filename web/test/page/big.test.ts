// A record of twelve hours at 100 readbacks a second: drawn at once, zoomed at once, and Off is
// not in its way.

import assert from "node:assert/strict";
import { existsSync, rmSync } from "node:fs";
import { join } from "node:path";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { Off, Readings, RecordList, Run, Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, picture, sit, until } from "./desk.ts";
import { CAPACITY, NIGHT } from "./sequences.ts";

/** On a loaded machine Off may take so many times what it takes on a quiet one. How long a
 * picture takes is told and not held: what it costs is. */
const LOADED = 10;
/** Of the daemon's processor time: the first picture, and a zoom. */
const DRAWING_S_MAX = 1;
const ZOOMING_S_MAX = 0.1;
/** Of an answer, for a plot as wide as the desktop's. */
const ANSWER_BYTES_MAX = 150_000;
const PANELS = 3;
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

/** Gives every button an id to be clicked by. */
const named = (page: Page): Promise<void> =>
  page.evaluate(() => {
    for (const button of document.querySelectorAll("button")) button.id ||= `b-${button.textContent ?? ""}`.replaceAll(" ", "");
  });

/** Counts what is drawn: how often a panel is drawn anew, and the rectangles put into paths. */
const counted = (page: Page): Promise<void> =>
  page.evaluate(() => {
    const counts = { drawn: 0, rectangles: 0 };
    (window as unknown as { counts: typeof counts }).counts = counts;
    const { clearRect, rect } = CanvasRenderingContext2D.prototype;
    CanvasRenderingContext2D.prototype.clearRect = function (...box) {
      counts.drawn += 1;
      clearRect.apply(this, box);
    };
    CanvasRenderingContext2D.prototype.rect = function (...box) {
      counts.rectangles += 1;
      rect.apply(this, box);
    };
  });
const counts = (page: Page): Promise<{ drawn: number; rectangles: number }> =>
  page.evaluate(() => (window as unknown as { counts: { drawn: number; rectangles: number } }).counts);

test("its first picture and every zoom are cheap: one question, one answer, two drawings", async (t) => {
  const { context, page, complaints } = await sit(daemon);
  await page.getByRole("link", { name: "Records" }).click();
  await page.getByRole("link", { name: "K-01", exact: true }).waitFor();
  const before = daemon.processor_s();
  const first = await timed(page, 'a[href*="#/record/"]', DRAWN);
  const drawing = daemon.processor_s() - before;
  // A rehearsal's record is kept without figures: they are worked out now, and are not the zoom's.
  await page.getByRole("heading", { name: "Figures" }).waitFor({ timeout: 60_000 });
  await named(page);
  await counted(page);
  const width = await page.locator(".plots").evaluate((plots) => plots.clientWidth);
  const answers: { bytes: number; points: number }[] = [];
  page.on("response", (response) => {
    if (!response.url().includes("/readings?")) return;
    void response.body().then((body) => answers.push({ bytes: body.length, points: (JSON.parse(body.toString()) as Readings).curve.time_s.length }));
  });
  const zooms: number[] = [];
  const between = daemon.processor_s();
  for (let zoom = 0; zoom < 12; zoom += 1) {
    zooms.push(await timed(page, zoom % 4 === 3 ? "#b-Later" : "#b-Zoomin", "figure:not([aria-busy])"));
    await until("the answer to be read", () => Promise.resolve(answers.length > zoom));
    assert.equal(answers.length, zoom + 1, "one question a zoom");
  }
  const zooming = (daemon.processor_s() - between) / zooms.length;
  const { drawn, rectangles } = await counts(page);
  await picture(page, "night-zoomed");
  zooms.push(await timed(page, "#b-Whole", "figure:not([aria-busy])"));
  await picture(page, "night");
  assert.equal(answers.length, 12, "the whole is known and not asked for again");
  const heap = await page.evaluate(() => (performance as unknown as { memory: { usedJSHeapSize: number } }).memory.usedJSHeapSize);
  const sorted = [...zooms].sort((one, other) => one - other);
  t.diagnostic(
    `first picture ${first.toFixed(0)} ms; zooms ${zooms.map((ms) => ms.toFixed(0)).join(", ")} ms, median ${sorted[6]?.toFixed(0) ?? ""} ms, slowest ${sorted.at(-1)?.toFixed(0) ?? ""} ms; ` +
      `heap ${(heap / 1e6).toFixed(1)} MB; processor time ${(drawing * 1000).toFixed(0)} ms, then ${(zooming * 1000).toFixed(0)} ms a zoom; ${drawn / 12} panels drawn a zoom, ${Math.max(...answers.map(({ bytes }) => bytes)) / 1000} kB at most`,
  );
  // The first picture reads the sketch, a close zoom a segment of the record, once.
  assert.ok(drawing < DRAWING_S_MAX, `the daemon worked ${drawing} s for the first picture`);
  assert.ok(zooming < ZOOMING_S_MAX, `the daemon worked ${zooming} s for a zoom`);
  for (const { bytes, points } of answers) {
    assert.ok(bytes < ANSWER_BYTES_MAX, `an answer of ${bytes} bytes`);
    assert.ok(points > width / 4 && points <= width + 1, `${points} points on ${width} px`);
  }
  // Once at the gesture, once with the answer.
  assert.ok(drawn <= 12 * 2 * PANELS, `${drawn} panels drawn for 12 zooms`);
  // A shade as one path of a thousand rectangles is what a browser draws slowly.
  assert.ok(rectangles < drawn * 10, `${rectangles} rectangles in paths`);
  assert.deepEqual(complaints, []);
  await context.close();
});

test("a zoom is drawn without waiting for the daemon, and gestures do not queue up before it", async () => {
  const { context, page, complaints } = await sit(daemon);
  await page.goto(`${daemon.url}/#/record/${id}`);
  await page.locator(DRAWN).waitFor();
  await named(page);
  await counted(page);
  let asked = 0;
  let answer = (): void => {};
  const held = new Promise<void>((resolve) => (answer = resolve));
  await page.route("**/readings?*", async (route) => {
    asked += 1;
    await held;
    await route.continue();
  });
  // Of the gestures, one is asked about and the others wait; the plot has followed each of them.
  const label = await page.evaluate(async () => {
    const frame = (): Promise<number> => new Promise(requestAnimationFrame);
    for (let gesture = 0; gesture < 6; gesture += 1) {
      document.querySelector<HTMLElement>("#b-Zoomin")?.click();
      await frame();
    }
    const figure = document.querySelector("figure");
    return `${figure?.getAttribute("aria-label") ?? ""}; busy ${figure?.getAttribute("aria-busy") ?? ""}`;
  });
  assert.match(label, /from 5.h 5\d.min to 6.h 0\d.min; busy true$/);
  assert.ok((await counts(page)).drawn >= 6 * PANELS);
  await until("the first question", () => Promise.resolve(asked > 0));
  assert.equal(asked, 1);
  answer();
  await page.locator("figure:not([aria-busy])").waitFor();
  assert.equal(asked, 2, "of those that waited only the latest is asked");
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
