// A calibration beside meters, guided by the page; the certificate, and its verification.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { CertificateList, Sink } from "../../src/api/types.ts";
import { DESKTOP, Daemon, PHONE, closeBrowser, picture, sit, until, violations } from "./desk.ts";

/** The page's 30 s are six of the person's. */
const FACTOR = 5;
/** What the meters read, invented: 2 % and 1.5 mA more than is read back. */
const [GAIN, OFFSET_A] = [1.02, 0.0015];
const SETPOINTS = ["100 mA", "400 mA", "800 mA", "1.2 A", "1.6 A"];

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(FACTOR);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

async function fill(page: Page): Promise<void> {
  await page.goto(`${daemon.url}/#/calibration`);
  await page.getByRole("combobox", { name: "Sink" }).selectOption("left");
  await page.getByRole("combobox", { name: "It is" }).selectOption("cell");
  await page.getByLabel("What is written on it").fill("K-01");
  await page.getByLabel("Least voltage").fill("2.5 V");
  await page.getByLabel("Largest voltage").fill("4.2 V");
  await page.getByLabel("Largest current").fill("6.4 A");
  await page.getByLabel("Undervoltage: off below").fill("2.6 V");
  await page.getByLabel("Who measures").fill("A. Technician");
  for (const meter of ["Current meter", "Voltage meter"]) {
    const fields = page.getByRole("group", { name: new RegExp(`^${meter}`) });
    await fields.getByLabel("Maker, model, number").fill(`invented ${meter.toLowerCase()}, no. 1`);
    await fields.getByLabel("Accuracy: share of the reading").fill("0.1 %");
    await fields.getByLabel("plus share of the range").fill("0.02 %");
  }
}

/** Reads the meters beside some setpoints as a person would, from what the sink reads back. */
async function measure(page: Page, from: number, to: number, points: number): Promise<void> {
  for (let point = from; point <= to; point += 1) {
    await page.getByText(new RegExp(`^Point ${point} of ${points}: .* Settled: read the meters`)).first().waitFor();
    const text = (await page.getByText(/^Read back, nominal, mean of/).textContent()) ?? "";
    const [, amps, milli, volt] = /: ([\d.]+)\s(m?)A .*?, ([\d.]+)\sV \(/.exec(text) ?? [];
    const current_a = Number(amps) * (milli === "m" ? 1e-3 : 1) * GAIN + OFFSET_A;
    // The field has the focus: two numbers and Enter.
    await page.keyboard.type(`${(current_a * 1000).toFixed(1)} mA`);
    await page.keyboard.press("Tab");
    await page.keyboard.type(`${Number(volt).toFixed(3)} V`);
    await page.keyboard.press("Enter");
    await until("the point to be taken", async () => (await page.getByRole("region", { name: "Points taken" }).locator("tbody tr").count()) === point);
  }
}

test("a sink is calibrated point by point, and the certificate is shown, listed and verified", { timeout: 120_000 }, async () => {
  const { context, page, complaints } = await sit(daemon);
  await fill(page);
  await page.getByText("There is none beside the bench file").waitFor();
  // Setpoints over the sink's range are proposed.
  assert.match(await page.getByLabel("Nominal currents").inputValue(), /^30 mA, .*2\.7 A$/);
  await page.getByLabel("Nominal currents").fill(SETPOINTS.join(", "));
  await page.getByRole("button", { name: "Hold the first point" }).click();
  await page.getByText(/^Held from this page, 30\.0\ss at a time/).waitFor();
  await measure(page, 1, 2, SETPOINTS.length);
  await picture(page, "calibration-under-way");
  assert.deepEqual(await violations(page), []);
  await measure(page, 3, SETPOINTS.length, SETPOINTS.length);
  await page.getByText(/^All points are taken/).first().waitFor();
  await page.keyboard.press("Enter");
  await page.getByRole("heading", { name: "The certificate", exact: true }).waitFor();
  await page.getByText(/^certificate = "certificates\/weir-left-/).waitFor();
  const { certificates } = await daemon.get<CertificateList>("/v1/certificates");
  const [made] = certificates;
  assert.ok(made && certificates.length === 1);
  const slope = made.lines.find(({ channel }) => channel === "current read")?.slope ?? 0;
  assert.ok(Math.abs(slope - GAIN) < 0.002, `${slope}`);
  const cells = page.getByRole("region", { name: "Lines of the certificate" }).first().getByRole("row", { name: /^current read/ });
  assert.match((await cells.textContent()) ?? "", /1\.0(1|2)\d+ ± 0\.000/);
  await picture(page, "calibration-certificate");
  assert.deepEqual(await violations(page), []);
  await until("the sink to be off", async () => (await daemon.get<Sink>("/v1/sinks/left")).run === null);

  // The same meters find it confirmed.
  await page.getByRole("combobox", { name: "It makes" }).selectOption(made.identity);
  await page.getByLabel("Nominal currents").fill("600 mA, 1 A");
  await page.getByRole("button", { name: "Hold the first point" }).click();
  await measure(page, 1, 2, 2);
  await page.getByRole("button", { name: "Finish", exact: true }).click();
  await page.getByRole("heading", { name: "Verified" }).waitFor();
  await page.getByRole("region", { name: "Points of the verification" }).first().getByText("passed").first().waitFor();
  await page.locator(".certificate summary").filter({ hasText: "verified" }).waitFor();
  assert.deepEqual(complaints.filter((text) => !/4\d\d/.test(text)), []);
  await context.close();
});

test("the current alone is calibrated where there is no voltage meter", async () => {
  const { context, page, complaints } = await sit(daemon);
  await fill(page);
  await page.getByRole("group", { name: /^Voltage meter/ }).getByLabel("Maker, model, number").fill("");
  await page.getByLabel("A new one is called").fill("weir-left-current");
  await page.getByLabel("Nominal currents").fill("200 mA, 700 mA, 1.2 A");
  await page.getByRole("button", { name: "Hold the first point" }).click();
  for (const point of [1, 2, 3]) {
    await page.getByText(new RegExp(`^Point ${point} of 3: .* Settled`)).first().waitFor();
    assert.ok(await page.getByLabel("Voltage meter", { exact: true }).isDisabled());
    await page.keyboard.type(["203.1 mA", "710.9 mA", "1.2187 A"][point - 1] ?? "");
    await page.keyboard.press("Enter");
  }
  await page.getByText(/^All points are taken/).first().waitFor();
  await page.getByRole("button", { name: "Finish", exact: true }).click();
  await page.getByRole("heading", { name: "The certificate", exact: true }).waitFor();
  const rows = page.getByRole("region", { name: "Lines of the certificate" }).first().locator("tbody tr");
  assert.deepEqual(await rows.locator("th").allTextContents(), ["current set", "current read"]);
  assert.deepEqual(complaints, []);
  await context.close();
});

test("a page that is left takes nothing further: the sink goes off, and what is asked amiss is told", async () => {
  const { context, page } = await sit(daemon);
  await fill(page);
  await page.getByLabel("Nominal currents").fill("100 mA, 50 A");
  await page.getByRole("button", { name: "Hold the first point" }).click();
  await page.getByText(/^Not begun/).waitFor();
  assert.equal((await daemon.get<Sink>("/v1/sinks/left")).run, null);
  await page.getByLabel("Nominal currents").fill("100 mA, 500 mA");
  await page.getByLabel("A new one is called").fill("weir-left-second");
  await page.getByRole("button", { name: "Hold the first point" }).click();
  await page.getByText(/^Point 1 of 2/).first().waitFor();
  await page.getByRole("button", { name: "Off left" }).click();
  await page.getByText(/^The run has ended before all points were taken/).first().waitFor();
  assert.equal(await page.getByText(/Not held/).count(), 0);
  await until("the sink to be free", async () => (await daemon.get<Sink>("/v1/sinks/left")).run === null);
  // Another can begin, without a reload.
  await page.getByRole("button", { name: "Hold the first point" }).click();
  await page.getByText(/^Point 1 of 2/).first().waitFor();
  await page.getByRole("link", { name: "Bench", exact: true }).click();
  await until("the sink to be off", async () => (await daemon.get<Sink>("/v1/sinks/left")).run === null);
  await context.close();
});

for (const [device, size] of [["desktop", DESKTOP], ["phone", PHONE]] as const) {
  for (const dark of [false, true]) {
    test(`calibration on a ${device} by ${dark ? "night" : "day"}`, async () => {
      const { context, page, complaints } = await sit(daemon, { size, dark });
      await fill(page);
      await page.locator(".certificate summary").first().click();
      const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
      assert.ok(wide <= 0, `${wide} px wider than the screen`);
      await picture(page, `calibration-${device}-${dark ? "night" : "day"}`);
      assert.deepEqual(await violations(page), []);
      assert.deepEqual(complaints, []);
      await context.close();
    });
  }
}
