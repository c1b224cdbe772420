// The daemon is lost and comes back.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Run, Sink } from "../../src/api/types.ts";
import { Daemon, closeBrowser, picture, sit, until, violations } from "./desk.ts";
import { CAPACITY } from "./sequences.ts";

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(100);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

test("a daemon that dies is missed at once, and found again with its run going on", async () => {
  const { context, page, complaints } = await sit(daemon);
  const run = await daemon.post<Run>("/v1/runs", { sequence: CAPACITY, sink: "left", dut: "K-01" });
  const left = page.getByRole("article", { name: "left" });
  await left.getByText("running").waitFor();
  await daemon.kill();
  const lost = page.getByText(/^No word from the daemon since \d\d:\d\d:\d\d/);
  await lost.waitFor({ timeout: 5_000 });
  await page.getByRole("alert").getByText(/No word from the daemon/).waitFor();
  await picture(page, "daemon-lost");
  assert.deepEqual(await violations(page), []);
  // Off says what it cannot do, and what to do instead.
  await page.getByRole("button", { name: "Off left" }).click();
  await page.getByText(/does not answer. In danger, cut the circuit by hand/).first().waitFor();

  await daemon.start();
  await lost.waitFor({ state: "hidden", timeout: 15_000 });
  await page.getByRole("status").getByText("The daemon answers again").waitFor();
  // The run was to be resumed; the page shows it without being loaded anew.
  await until("the run to go on", async () => (await daemon.get<Sink>("/v1/sinks/left")).run?.id === run.id);
  await left.getByText("running").waitFor();
  const elapsed = async (): Promise<string> => (await left.locator(".course").textContent()) ?? "";
  const before = await elapsed();
  await until("the row to move", async () => (await elapsed()) !== before);
  // What the browser itself writes down of a refused connection is no error of the page.
  assert.deepEqual(complaints.filter((text) => !/ERR_CONNECTION|ERR_INCOMPLETE|Failed to load resource/.test(text)), []);
  await context.close();
});

test("after a drop of the link the stream goes on behind the last event that was heard", async () => {
  const { context, page } = await sit(daemon);
  const asked: (string | undefined)[] = [];
  page.on("request", (request) => {
    if (request.url().endsWith("/v1/events")) asked.push(request.headers()["last-event-id"]);
  });
  await page.getByRole("article", { name: "left" }).getByText("running").waitFor();
  await context.setOffline(true);
  // An open stream outlives the loss in the browser's own simulation: let go of it.
  await page.evaluate(() => window.dispatchEvent(new Event("offline")));
  const lost = page.getByText(/^No word from the daemon since/);
  await lost.waitFor();
  await daemon.post("/v1/off");
  await context.setOffline(false);
  await lost.waitFor({ state: "hidden", timeout: 15_000 });
  // What happened meanwhile is in the chronicle.
  await page.getByText(/K-01 on left: stopped/).first().waitFor();
  assert.ok(asked.some((id) => id !== undefined && Number(id) > 0), `asked with ${asked.join(", ")}`);
  await context.close();
});
