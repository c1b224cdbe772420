// The records: found by device under test and by label, chosen for comparing.

import { daemon } from "../api/client.ts";
import type { RecordSummary } from "../api/types.ts";
import { clockNote, moment } from "../core/format.ts";
import { type Chosen, EVERYTHING, labelsOf, matching } from "../core/records.ts";
import { link } from "../core/route.ts";
import { attribute, h, reasonOf, write } from "../dom.ts";
import { fileLink } from "../parts/file.ts";
import type { View } from "../view.ts";

/** Rows shown at once; the filter finds the others. */
const ROWS_MAX = 200;

export function recordsView(): View {
  let all: RecordSummary[] = [];
  let chosen: Chosen = EVERYTHING;
  const picked = new Set<string>();
  const said = h("p", { class: "quiet", role: "status" }, "Reading the records folder …");
  const compare = h("a", { class: "button" }, "Compare");
  const body = h("tbody");
  const [duts, labels] = [h("datalist", { id: "duts" }), h("datalist", { id: "labels" })];

  const field = (name: string, id: string, list: string, change: (value: string) => void): HTMLElement =>
    h(
      "label",
      {},
      name,
      h("input", { id, list, type: "search", autocomplete: "off", oninput: (event) => change((event.target as HTMLInputElement).value) }),
    );
  const ending = h(
    "label",
    {},
    "Ended",
    h(
      "select",
      { onchange: (event) => filter({ ending: (event.target as HTMLSelectElement).value }) },
      h("option", { value: "" }, "in any way"),
      ...["finished", "stopped", "tripped", "interrupted"].map((how) => h("option", { value: how }, how)),
    ),
  );
  const element = h(
    "main",
    { id: "main", tabindex: -1 },
    h("h2", {}, "Records"),
    h(
      "form",
      { class: "filter", role: "search", onsubmit: (event) => event.preventDefault() },
      field("Device under test", "filter-dut", "duts", (dut) => filter({ dut })),
      field("Label of a step", "filter-label", "labels", (label) => filter({ label })),
      ending,
      duts,
      labels,
    ),
    h("p", { class: "actions" }, compare, said),
    h(
      "table",
      { class: "records" },
      h(
        "thead",
        {},
        h("tr", {}, ...["", "Device", "Sequence", "Sink", "Started", "Ended", ""].map((text, index) =>
          text === "" ? h("td", {}) : h("th", { scope: "col", "data-column": index }, text),
        )),
      ),
      body,
    ),
  );

  function filter(change: Partial<Chosen>): void {
    chosen = { ...chosen, ...change };
    draw();
  }

  function draw(): void {
    const found = matching(all, chosen);
    body.replaceChildren(...found.slice(0, ROWS_MAX).map(row));
    const more = found.length > ROWS_MAX ? `, the latest ${ROWS_MAX} shown` : "";
    write(said, `${found.length} of ${all.length} records${more}`);
    drawCompare();
  }

  function drawCompare(): void {
    const ids = all.filter(({ id }) => picked.has(id)).map(({ id }) => id);
    write(compare, ids.length < 2 ? "Choose two or more to compare" : `Compare ${ids.length} records`);
    attribute(compare, "href", ids.length < 2 ? null : link({ view: "compare", groups: [{ name: "", ids }] }));
    attribute(compare, "role", ids.length < 2 ? "link" : null);
    attribute(compare, "aria-disabled", ids.length < 2 ? "true" : null);
  }

  function row(record: RecordSummary): HTMLElement {
    const choose = h("input", {
      type: "checkbox",
      "aria-label": `Compare ${record.dut} of ${moment(new Date(record.started))}`,
      checked: picked.has(record.id),
      onchange: (event) => {
        if ((event.target as HTMLInputElement).checked) picked.add(record.id);
        else picked.delete(record.id);
        drawCompare();
      },
    });
    const how = record.ending?.how ?? "in progress";
    const reason = record.ending?.reason;
    const note = clockNote(record.clock);
    return h(
      "tr",
      { "data-how": how },
      h("td", { class: "pick" }, choose),
      h("th", { scope: "row" }, h("a", { href: link({ view: "record", id: record.id }) }, record.dut)),
      h("td", { class: "wide" }, record.title),
      h("td", {}, record.sink),
      h("td", { class: "figures" }, moment(new Date(record.started)), note !== "" && h("span", { class: "quiet" }, ` ${note}`)),
      h("td", {}, how, reason ? h("span", { class: "reason" }, reason) : null),
      h("td", {}, record.sealed && fileLink("Report", daemon.reportPath(record.id), `${record.folder}.html`, true)),
    );
  }

  async function load(): Promise<void> {
    try {
      const list = await daemon.records();
      all = list.records;
      duts.replaceChildren(...[...new Set(all.map(({ dut }) => dut))].sort().map((value) => h("option", { value })));
      labels.replaceChildren(...labelsOf(all).map((value) => h("option", { value })));
      draw();
      for (const { folder, reason } of list.unreadable) said.append(`; ${folder} cannot be read: ${reason}`);
    } catch (error) {
      write(said, reasonOf(error));
    }
  }
  drawCompare();
  void load();
  return { title: "Records", element, update() {}, close() {} };
}
