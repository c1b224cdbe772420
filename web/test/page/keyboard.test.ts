// The whole page by keyboard alone.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { Run, Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, sit, until } from "./desk.ts";
import { CAPACITY } from "./sequences.ts";

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(200);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

/** What has the focus, as a screen reader would name it. */
const focused = (page: Page): Promise<string> =>
  page.evaluate(() => {
    const element = document.activeElement;
    return element?.getAttribute("aria-label") ?? (element instanceof HTMLElement ? element.innerText.trim().replace(/\s+/g, " ") : "");
  });

/** Presses Tab until something has the focus, and sees that it shows. */
async function tabTo(page: Page, name: RegExp): Promise<void> {
  const passed: string[] = [];
  for (let press = 0; press < 60; press += 1) {
    await page.keyboard.press("Tab");
    const now = await focused(page);
    passed.push(now);
    if (!name.test(now)) continue;
    const outline = await page.evaluate(() => getComputedStyle(document.activeElement as Element).outlineStyle);
    assert.notEqual(outline, "none", `the focus on ${now} is not seen`);
    return;
  }
  assert.fail(`no Tab leads to ${name}; it led to ${passed.join(", ")}`);
}

test("a sink is turned off with Tab and Enter", async () => {
  const { context, page } = await sit(daemon);
  await daemon.post<Run>("/v1/runs", { sequence: CAPACITY, sink: "left", dut: "K-01" });
  await until("current", async () => ((await daemon.get<Sink>("/v1/sinks/left")).reading?.current_a ?? 0) > 0.5);
  await tabTo(page, /^Off left/);
  await page.keyboard.press("Enter");
  await until("the run to end", async () => (await daemon.get<Sink>("/v1/sinks/left")).run === null);
  // The focus stays where it was: another tap can follow.
  assert.match(await focused(page), /^Off left/);
  await context.close();
});

test("a sequence is written, checked and started, its curve zoomed and read off", async () => {
  const { context, page } = await sit(daemon);
  await tabTo(page, /^Sequence$/);
  await page.keyboard.press("Enter");
  await page.getByLabel("Or paste it here").waitFor();
  assert.equal(await page.evaluate(() => document.activeElement?.id), "main");
  for (let press = 0; press < 10; press += 1) {
    await page.keyboard.press("Tab");
    if ((await page.evaluate(() => document.activeElement?.id)) === "text") break;
  }
  await page.keyboard.insertText(CAPACITY);
  await page.getByText(/^It may run/).waitFor();
  await tabTo(page, /^Start$/);
  await page.keyboard.press("Enter");
  await page.getByRole("heading", { name: "K-01", level: 2 }).waitFor();
  await until("a curve", async () => (await page.getByRole("figure").getAttribute("aria-label")) !== null);
  await tabTo(page, /^Read off$/);
  await page.keyboard.press("End");
  await until("a reading", async () => / V, /.test((await page.locator("output").textContent()) ?? "") || /\u00a0V, /.test((await page.locator("output").textContent()) ?? ""));
  const whole = await page.getByRole("figure").getAttribute("aria-label");
  await tabTo(page, /^Zoom in$/);
  await page.keyboard.press("Space");
  await until("the zoom", async () => (await page.getByRole("figure").getAttribute("aria-label")) !== whole);
  await tabTo(page, /^Whole$/);
  await page.keyboard.press("Enter");
  await until("the whole", async () => /from 0/.test((await page.getByRole("figure").getAttribute("aria-label")) ?? ""));
  await daemon.post("/v1/off");
  await context.close();
});
