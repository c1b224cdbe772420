// The job from a sequence with an error to a report, as a person does it.

import assert from "node:assert/strict";
import { after, afterEach, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { RecordList, Run, Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, picture, sit, until, violations } from "./desk.ts";
import { CAPACITY, LOOSENED, SHORT, TRIPPING } from "./sequences.ts";

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(500);
});
afterEach(async () => {
  await daemon.post("/v1/off");
  await until("every run to end", async () => (await daemon.get<{ sinks: Sink[] }>("/v1/sinks")).sinks.every(({ run }) => run === null));
  await daemon.post("/v1/sinks/left/reset");
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

const row = (page: Page, sink: string) => page.getByRole("article", { name: sink });
const endedRun = async (sink: string): Promise<Run | undefined> =>
  (await daemon.get<{ runs: Run[] }>("/v1/runs")).runs.find((run) => run.sink === sink && run.state === "ended");
/** A refused check is an answer of 422, and the browser writes every such answer down. */
const unexpected = (complaints: string[]): string[] => complaints.filter((text) => !text.includes("422"));

test("a sequence with an error is mended, seen, rehearsed and started; margins move", async () => {
  const { context, page, complaints } = await sit(daemon);
  await page.getByRole("link", { name: "Sequence" }).click();
  await page.getByLabel("Or paste it here").fill(LOOSENED);
  const finding = page.getByText("looser than the bench's 3 A");
  await finding.waitFor();
  assert.ok(await page.getByRole("button", { name: "Start" }).isDisabled());
  await picture(page, "sequence-finding");
  // The finding leads to its place in the text.
  await page.getByRole("button", { name: /^line 20/ }).first().click();
  const selected = await page.evaluate(() => {
    const text = document.querySelector("textarea");
    return text ? text.value.slice(text.selectionStart, text.selectionEnd) : "";
  });
  assert.equal(selected, '"8 A"');

  await page.keyboard.type('"800 mA"');
  assert.equal(await page.getByLabel("Or paste it here").inputValue(), CAPACITY);
  await page.getByText(/^It may run on left/).waitFor();
  assert.equal(await finding.count(), 0);
  await page.getByRole("img", { name: /^Planned current.*0\.640 A over 5/ }).waitFor();
  await page.getByRole("button", { name: "Rehearse" }).click();
  await page.getByText(/^finished after 5/).waitFor({ timeout: 120_000 });
  await picture(page, "sequence-rehearsed");
  assert.deepEqual(await violations(page), []);

  await page.getByRole("button", { name: "Start" }).click();
  await page.getByRole("heading", { name: "K-01", level: 2 }).waitFor();
  await page.getByText("The rehearsal is drawn behind").waitFor();
  await page.getByText(/discharge ·/).waitFor();

  await page.getByRole("link", { name: "Bench" }).click();
  const left = row(page, "left");
  const charge = left.getByRole("meter", { name: "charge" });
  const near = async (): Promise<number> => Number(await charge.getAttribute("aria-valuenow"));
  const before = await near();
  await until("the margin of the charge to move", async () => (await near()) >= before + 2);
  await left.getByText(/of about 5/).waitFor();
  assert.match((await left.getByText(/ends about/).textContent()) ?? "", /ends about .*\d\d:\d\d/);
  await picture(page, "bench-running");

  // The curve of the run, with the prediction behind it, while it goes on.
  await left.getByRole("link", { name: "K-01", exact: true }).click();
  await until("some curve", async () => {
    await page.getByLabel("Read off").fill("100");
    return /V, /.test((await page.locator("output").textContent()) ?? "");
  });
  await picture(page, "run-in-progress");
  assert.deepEqual(unexpected(complaints), []);
  await daemon.post("/v1/off");
  await until("the end", async () => (await endedRun("left")) !== undefined);
  await context.close();
});

test("a trip is told with its reason and its number, and is reset", async () => {
  const { context, page, complaints } = await sit(daemon);
  await daemon.post("/v1/runs", { sequence: TRIPPING, sink: "left", dut: "K-01" });
  const left = row(page, "left");
  const told = left.getByText(/^Tripped: undervoltage, 3\.\d+.V where 4\.000\d*.V is the limit/);
  await told.waitFor({ timeout: 90_000 });
  await page.getByRole("alert").getByText(/undervoltage/).first().waitFor();
  await left.getByText("tripped: undervoltage", { exact: true }).waitFor();
  await picture(page, "bench-tripped");
  assert.deepEqual(await violations(page), []);
  await left.getByRole("button", { name: "Reset left" }).click();
  await until("the reset", async () => (await daemon.get<Sink>("/v1/sinks/left")).latched_by === null);
  await told.waitFor({ state: "detached" }).catch(() => told.waitFor({ state: "hidden" }));
  await page.getByRole("status").getByText("left is reset").waitFor();
  assert.deepEqual(unexpected(complaints), []);
  await context.close();
});

test("Off stops a run at once, from any page, and says that the sink is off", async () => {
  const { context, page, complaints } = await sit(daemon);
  const run = await daemon.post<Run>("/v1/runs", { sequence: CAPACITY, sink: "left", dut: "K-02" });
  await page.getByRole("link", { name: "Records" }).click();
  const off = page.getByRole("button", { name: "Off left" });
  await until("current", async () => ((await daemon.get<Sink>("/v1/sinks/left")).reading?.current_a ?? 0) > 0.5);
  await page.locator(".off-one[data-draws]", { hasText: "left" }).waitFor();
  const sent: { method: string; body: string | null; url: string }[] = [];
  page.on("request", (request) => {
    if (request.method() === "POST") sent.push({ method: request.method(), body: request.postData(), url: new URL(request.url()).pathname });
  });
  await off.click();
  await page.getByText(/^left is off \(/).first().waitFor();
  assert.deepEqual(sent, [{ method: "POST", body: null, url: "/v1/sinks/left/off" }]);
  const ended = await daemon.get<Run>(`/v1/runs/${run.id}`);
  assert.equal(ended.ending?.how, "stopped");
  assert.deepEqual(unexpected(complaints), []);
  await context.close();
});

test("records are found, compared in one plot, read off, and their report is opened", async () => {
  for (const dut of ["M-01", "M-02"]) {
    const run = await daemon.post<Run>("/v1/runs", { sequence: SHORT, sink: "left", dut });
    await until("the record", async () => (await daemon.get<Run>(`/v1/runs/${run.id}`)).sealed);
  }
  const { context, page, complaints } = await sit(daemon);
  await page.getByRole("link", { name: "Records" }).click();
  await page.getByText(/records$/).waitFor();
  const all = (await daemon.get<RecordList>("/v1/records")).records.length;
  const rows = page.locator("tbody tr");
  assert.equal(await rows.count(), all);
  await page.getByLabel("Device under test").fill("M-");
  await until("the filter", async () => (await rows.count()) === 2);
  await picture(page, "records-filtered");
  assert.deepEqual(await violations(page), []);
  for (const box of await page.getByRole("checkbox").all()) await box.check();
  await page.getByRole("link", { name: "Compare 2 records" }).click();
  await page.getByText("Figures side by side").waitFor();
  // Read off with the keyboard alone.
  await page.getByLabel("Read off").focus();
  for (let press = 0; press < 3; press += 1) await page.keyboard.press("PageUp");
  await until("both to be read off", async () => {
    const text = (await page.locator("output").textContent()) ?? "";
    return text.includes("M-01") && text.includes("M-02");
  });
  await picture(page, "compare");
  assert.deepEqual(await violations(page), []);

  await page.getByRole("link", { name: "M-02", exact: true }).click();
  await page.getByText("Delivered charge").first().waitFor();
  await picture(page, "record-finished");
  assert.deepEqual(await violations(page), []);
  assert.deepEqual(unexpected(complaints), []);
  const report = page.getByRole("link", { name: "Report" });
  const path = (await report.getAttribute("href")) ?? "";
  const [opened] = await Promise.all([context.waitForEvent("page"), report.click()]);
  await opened.waitForLoadState();
  assert.equal(new URL(opened.url()).pathname, path);
  assert.match((await opened.textContent("body")) ?? "", /M-02/);
  await context.close();
});
