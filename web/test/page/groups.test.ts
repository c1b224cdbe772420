// Groups of records: put together by rule and by hand, and told in words what they show.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Comparison, RecordList, Run } from "../../src/api/types.ts";
import { DESKTOP, Daemon, PHONE, closeBrowser, picture, sit, until, violations } from "./desk.ts";
import { SHORT } from "./sequences.ts";

const DUTS = ["K-01", "K-02", "K-03", "M-01", "M-02", "M-03"];

let daemon: Daemon;
let address = "";
before(async () => {
  daemon = await Daemon.open(500);
  for (const dut of DUTS) {
    const run = await daemon.post<Run>("/v1/runs", { sequence: SHORT, sink: "left", dut });
    await until("the record", async () => (await daemon.get<Run>(`/v1/runs/${run.id}`)).sealed);
  }
  const { records } = await daemon.get<RecordList>("/v1/records");
  address = `${daemon.url}/#/compare/${records.map(({ id }) => id).join(",")}`;
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

test("three cells of each kind are compared, and the words follow the daemon's own statistics", async () => {
  const { context, page, complaints } = await sit(daemon);
  const answer = page.waitForResponse(/\/v1\/comparison\?/);
  await page.goto(address);
  const { comparison } = (await (await answer).json()) as Comparison;
  await page.getByRole("heading", { name: "What the groups show" }).waitFor();
  const [voltage] = comparison.figures.filter(({ name }) => name === "mean_voltage" || name === "delivered_charge");
  assert.ok(voltage && voltage.groups.length === 2 && voltage.differences.length === 1, JSON.stringify(comparison.figures.map(({ name }) => name)));
  const contrast = page.locator(".contrast").filter({ hasText: voltage.name === "mean_voltage" ? "Mean voltage" : "Delivered charge" }).first();
  await contrast.waitFor();
  assert.equal(await contrast.locator("li").count(), 2);
  assert.equal(await contrast.locator(".strip-value").count(), 6);
  const [one] = voltage.differences;
  assert.ok(one);
  const shown = one.interval[0] > 0 || one.interval[1] < 0;
  await contrast.getByText(shown ? `${one.of} is ${one.difference > 0 ? "higher" : "lower"} than ${one.from} by` : /No difference between/).waitFor();
  await picture(page, "groups-desktop");

  // With the keyboard alone: another group for one record; the address follows.
  const field = page.getByLabel("Group of K-01");
  await field.focus();
  await page.keyboard.press("Control+A");
  await page.keyboard.type("old");
  const again = page.waitForResponse(/\/v1\/comparison\?/);
  await page.keyboard.press("Enter");
  assert.match(new URL((await again).url()).searchParams.get("groups") ?? "", /(^|;)old:[0-9a-f-]{36}(;|$)/);
  await page.getByText(/^One record in old/).first().waitFor();
  assert.match(page.url(), /old:/);
  // The address alone brings the same groups back.
  await page.reload();
  await page.getByText(/^One record in old/).first().waitFor();
  assert.equal(await page.getByLabel("Group of K-01").inputValue(), "old");
  await page.getByLabel("device", { exact: true }).check();
  await page.getByText(/^One record in M-03 and in M-02/).first().waitFor();
  assert.deepEqual(complaints, []);
  await context.close();
});

for (const [device, size] of [["desktop", DESKTOP], ["phone", PHONE]] as const) {
  for (const dark of [false, true]) {
    test(`groups on a ${device} by ${dark ? "night" : "day"}`, async () => {
      const { context, page, complaints } = await sit(daemon, { size, dark });
      await page.goto(address);
      await page.locator(".contrast").first().waitFor();
      await page.getByText("Figures side by side").waitFor();
      const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
      assert.ok(wide <= 0, `${wide} px wider than the screen`);
      await picture(page, `groups-${device}-${dark ? "night" : "day"}`);
      assert.deepEqual(await violations(page), []);
      assert.deepEqual(complaints, []);
      await context.close();
    });
  }
}
