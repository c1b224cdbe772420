// A current held by hand from the page: set, renewed by the page, let go by leaving it.

import assert from "node:assert/strict";
import { after, afterEach, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { Run, Sink } from "../../src/api/types.ts";
import { DESKTOP, Daemon, PHONE, closeBrowser, picture, sit, until, violations } from "./desk.ts";

/** The thirty seconds of an interval are six of the person's. */
const FACTOR = 5;

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(FACTOR);
});
afterEach(async () => {
  await daemon.post("/v1/off");
  await until("every run to end", async () => (await left()).run === null);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

const left = (): Promise<Sink> => daemon.get<Sink>("/v1/sinks/left");
const draws = async (current_a: number): Promise<boolean> => Math.abs(((await left()).reading?.current_a ?? 0) - current_a) < 0.03;

async function fill(page: Page): Promise<void> {
  await page.getByRole("combobox", { name: "Sink" }).selectOption("left");
  await page.getByLabel("What is written on it").fill("K-01");
  await page.getByLabel("Least voltage").fill("2.5 V");
  await page.getByLabel("Largest voltage").fill("4.2 V");
  await page.getByLabel("Largest current").fill("6.4 A");
  await page.getByLabel("Undervoltage: off below").fill("2.75 V");
  await page.getByLabel("Lasts, unless asked for again").fill("30 s");
}

async function take(page: Page): Promise<string> {
  await page.goto(`${daemon.url}/#/hand`);
  await fill(page);
  await page.getByRole("button", { name: "Take the sink" }).click();
  await page.getByRole("heading", { name: "left is held for K-01" }).waitFor();
  return (await left()).run?.id ?? "";
}

test("a current is set, held far beyond its interval, and let go when the page is left", async () => {
  const { context, page, complaints } = await sit(daemon);
  const id = await take(page);
  // With the keyboard alone: the field has the focus.
  await page.keyboard.type("500 mA");
  await page.keyboard.press("Enter");
  await until("500 mA", () => draws(0.5));
  await page.getByText(/^Set to 0\.500\sA, for/).waitFor();
  await page.getByText(/Held from this page, 30\.0\ss at a time/).waitFor();
  await until("two intervals", async () => ((await left()).run?.elapsed_s ?? 0) > 65);
  assert.ok(await draws(0.5));
  await picture(page, "hand-holding");
  assert.deepEqual(await violations(page), []);

  // What is refused changes nothing, and says why.
  await page.getByLabel("Current", { exact: true }).fill("9 A");
  await page.getByRole("button", { name: "Set", exact: true }).click();
  await page.getByText(/^Not set; what was set is held/).waitFor();
  assert.ok(await draws(0.5));
  await page.getByRole("button", { name: "Rest at 0 A" }).click();
  await until("0 A", () => draws(0));
  assert.equal((await left()).run?.id, id);

  await page.getByRole("link", { name: "Records", exact: true }).click();
  await until("the run to end", async () => (await daemon.get<Run>(`/v1/runs/${id}`)).ending?.how === "stopped");
  assert.deepEqual(complaints.filter((text) => !text.includes("422")), []);
  await context.close();
});

test("a page that is closed holds nothing any more: the sink goes off by itself", async () => {
  const { context, page } = await sit(daemon);
  const id = await take(page);
  await page.getByLabel("Current", { exact: true }).fill("300 mA");
  await page.keyboard.press("Enter");
  await until("300 mA", () => draws(0.3));
  // A reload goes on with it.
  await page.reload();
  await page.getByRole("heading", { name: "left is held for K-01" }).waitFor();
  await until("more than an interval", async () => ((await left()).run?.elapsed_s ?? 0) > 45);
  assert.ok(await draws(0.3));
  await context.close();
  await until("the end", async () => (await daemon.get<Run>(`/v1/runs/${id}`)).ending !== null);
  const run = await daemon.get<Run>(`/v1/runs/${id}`);
  assert.equal(run.ending?.how, "stopped");
  assert.match(run.ending?.reason ?? "", /not asked for again within its interval/);
  await until("nothing to flow", () => draws(0));
});

test("Off ends it at once, and the page says so and can begin again", async () => {
  const { context, page, complaints } = await sit(daemon);
  await take(page);
  await page.getByLabel("Current", { exact: true }).fill("300 mA");
  await page.keyboard.press("Enter");
  await until("300 mA", () => draws(0.3));
  await page.getByRole("button", { name: "Off left" }).click();
  await page.getByText(/^left is off: stopped/).waitFor();
  await page.getByRole("button", { name: "Take the sink" }).waitFor();
  await page.getByLabel("Undervoltage: off below").fill("2 V");
  await page.getByRole("button", { name: "Take the sink" }).click();
  await page.getByText(/^Not begun/).waitFor();
  assert.deepEqual(complaints.filter((text) => !/422|409/.test(text)), []);
  await context.close();
});

for (const [device, size] of [["desktop", DESKTOP], ["phone", PHONE]] as const) {
  for (const dark of [false, true]) {
    test(`by hand on a ${device} by ${dark ? "night" : "day"}`, async () => {
      const { context, page, complaints } = await sit(daemon, { size, dark });
      await page.goto(`${daemon.url}/#/hand`);
      await fill(page);
      await picture(page, `hand-form-${device}-${dark ? "night" : "day"}`);
      assert.deepEqual(await violations(page), []);
      await take(page);
      await page.getByLabel("Current", { exact: true }).fill("1 A");
      await page.keyboard.press("Enter");
      await until("1 A", () => draws(1));
      await page.locator(".bar").first().waitFor();
      const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
      assert.ok(wide <= 0, `${wide} px wider than the screen`);
      const off = await page.getByRole("button", { name: "Off left" }).boundingBox();
      assert.ok(off && off.y >= 0 && off.y + off.height <= size.height);
      await picture(page, `hand-${device}-${dark ? "night" : "day"}`);
      assert.deepEqual(await violations(page), []);
      assert.deepEqual(complaints, []);
      await context.close();
      await daemon.post("/v1/off");
    });
  }
}
