// Every view at both sizes, by day and by night: nothing wrong by axe, nothing wider than the
// screen, Off in view wherever one is. The pictures are kept to be looked at.

import assert from "node:assert/strict";
import { after, before, test } from "node:test";
import type { Page } from "playwright-core";
import type { RecordList, Run, Sink } from "../../src/api/types.ts";
import { DESKTOP, Daemon, PHONE, closeBrowser, picture, sit, until, violations } from "./desk.ts";
import { CAPACITY, LOOSENED, SHORT, TRIPPING } from "./sequences.ts";

let daemon: Daemon;
before(async () => {
  daemon = await Daemon.open(500);
  for (const dut of ["K-01", "M-01"]) {
    const run = await daemon.post<Run>("/v1/runs", { sequence: SHORT, sink: "left", dut });
    await until("the record", async () => (await daemon.get<Run>(`/v1/runs/${run.id}`)).sealed);
  }
  await daemon.post<Run>("/v1/runs", { sequence: TRIPPING, sink: "left", dut: "K-02" });
  await until("the trip", async () => (await daemon.get<Sink>("/v1/sinks/left")).latched_by !== null);
});
after(async () => {
  await closeBrowser();
  await daemon.close();
});

const VIEWS: [string, (page: Page) => Promise<void>][] = [
  ["bench", async (page) => void (await page.goto(`${daemon.url}/#/`))],
  [
    "sequence",
    async (page) => {
      await page.goto(`${daemon.url}/#/sequence`);
      await page.getByLabel("Or paste it here").fill(LOOSENED);
      await page.getByText("looser than").waitFor();
    },
  ],
  [
    "shape",
    async (page) => {
      await page.goto(`${daemon.url}/#/sequence`);
      await page.getByLabel("Or paste it here").fill(CAPACITY);
      await page.getByRole("img", { name: /^Planned current/ }).waitFor();
    },
  ],
  [
    "records",
    async (page) => {
      await page.goto(`${daemon.url}/#/records`);
      await page.getByText(/records$/).waitFor();
    },
  ],
  [
    "record",
    async (page) => {
      const { records } = await daemon.get<RecordList>("/v1/records");
      await page.goto(`${daemon.url}/#/record/${records.find(({ dut }) => dut === "K-01")?.id ?? ""}`);
      await page.getByRole("heading", { name: "Figures" }).waitFor();
    },
  ],
  [
    "compare",
    async (page) => {
      const { records } = await daemon.get<RecordList>("/v1/records");
      await page.goto(`${daemon.url}/#/compare/${records.slice(1, 3).map(({ id }) => id).join(",")}`);
      await page.getByText("Figures side by side").waitFor();
    },
  ],
];

for (const [device, size] of [["desktop", DESKTOP], ["phone", PHONE]] as const) {
  for (const dark of [false, true]) {
    test(`every view on a ${device} by ${dark ? "night" : "day"}`, async () => {
      const { context, page, complaints } = await sit(daemon, { size, dark });
      for (const [name, go] of VIEWS) {
        await go(page);
        await page.evaluate(() => document.fonts.ready);
        const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
        assert.ok(wide <= 0, `${name} is ${wide} px wider than the screen`);
        await page.evaluate(() => window.scrollTo(0, document.body.scrollHeight));
        for (const off of ["Off every sink", "Off left", "Off right"]) {
          const box = await page.getByRole("button", { name: off }).boundingBox();
          assert.ok(box && box.y >= 0 && box.y + box.height <= size.height, `${off} is out of view on ${name}`);
          assert.ok(box.height >= 44, `${off} is ${box.height} px high`);
        }
        await picture(page, `${name}-${device}-${dark ? "night" : "day"}`);
        assert.deepEqual(await violations(page), [], name);
      }
      assert.deepEqual(complaints.filter((text) => !text.includes("422")), []);
      await context.close();
    });
  }
}

test("a sink's row tells its state, its trip and its link in words, not in colour alone", async () => {
  const { context, page } = await sit(daemon);
  const left = page.getByRole("article", { name: "left" });
  await left.getByText("tripped: undervoltage", { exact: true }).waitFor();
  await left.getByText(/is the limit/).waitFor();
  await context.close();
});
