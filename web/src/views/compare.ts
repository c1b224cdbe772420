// Two or more records in one plot, and their figures side by side.

import { daemon } from "../api/client.ts";
import type { Figure as FigureOf, RecordSummary } from "../api/types.ts";
import { type Against, type Range, timeOf, traceOf } from "../core/curve.ts";
import { moment } from "../core/format.ts";
import { namesOf } from "../core/records.ts";
import { link } from "../core/route.ts";
import { h, reasonOf, write } from "../dom.ts";
import { choice } from "../parts/choice.ts";
import { nameOf, valueOf } from "../parts/figures.ts";
import { Figure } from "../plot/figure.ts";
import { Source } from "../plot/source.ts";
import type { View } from "../view.ts";

/** Figures that make sense side by side without more ado. */
const SHOWN = ["capacity", "energy", "mean_voltage", "delivered_charge", "duration", "dc_resistance", "peak_temperature"];

interface One {
  summary: RecordSummary;
  name: string;
  source: Source;
}

export function compareView(ids: readonly string[]): View {
  let against: Against = "charge";
  let all: One[] = [];
  const said = h("p", { class: "quiet", role: "status" }, "Reading the records …");
  const list = h("ul", { class: "compared" });
  const table = h("div");
  const figure = new Figure("Voltage, current and heat sink temperature of the records", ["voltage", "current", "temperature"], (range) =>
    void detail(range),
  );
  const element = h(
    "main",
    { id: "main", tabindex: -1 },
    h("h2", {}, "Compared"),
    list,
    h(
      "div",
      { class: "controls" },
      choice<Against>("Against", [["charge", "charge"], ["time", "time"]], "charge", (value) => {
        against = value;
        draw();
      }),
    ),
    said,
    figure.element,
    table,
  );

  function draw(): void {
    const traces = all.flatMap(({ name, source }) => (source.curve ? [traceOf(name, source.curve, against)] : []));
    figure.draw({ against, traces, shaded: false, behind: [], labels: [], marks: [] });
  }

  async function detail(range: Range | null): Promise<void> {
    if (range === null) {
      for (const { source } of all) source.forget();
      draw();
      return;
    }
    await figure.whileBusy(async () => {
      try {
        const stretches = all.map(async ({ source }) => {
          const { curve } = source;
          return curve !== null && source.stretch(timeOf(traceOf("", curve, against), range), figure.points);
        });
        if ((await Promise.all(stretches)).includes(true)) draw();
      } catch (error) {
        write(said, reasonOf(error));
      }
    });
  }

  async function load(): Promise<void> {
    try {
      const summaries = await Promise.all(ids.map(async (id) => (await daemon.record(id)).summary));
      const names = namesOf(summaries);
      all = summaries.map((summary, index) => ({ summary, name: names[index] ?? summary.dut, source: new Source(summary.id) }));
      list.replaceChildren(
        ...all.map(({ summary, name }) =>
          h("li", {}, h("a", { href: link({ view: "record", id: summary.id }) }, name), ` ${summary.title}, ${summary.sink}, ${moment(new Date(summary.started))}`),
        ),
      );
      await Promise.all(all.map(({ source }) => source.whole(figure.points)));
      write(said, "");
      draw();
      await figures();
    } catch (error) {
      write(said, reasonOf(error));
    }
  }

  async function figures(): Promise<void> {
    const found = await Promise.all(
      all.map(({ summary }) => daemon.figures(summary.id).then((one) => one.figures, () => [] as FigureOf[])),
    );
    const names = [...new Set(found.flat().filter(({ name }) => SHOWN.includes(name)).map(nameOf))];
    if (names.length === 0) return;
    const cell = (figures: readonly FigureOf[], name: string): string => {
      const figure = figures.find((one) => nameOf(one) === name);
      return figure ? valueOf(figure) : "–";
    };
    table.replaceChildren(
      h("h3", {}, "Figures side by side"),
      h(
        "div",
        { class: "scroll", tabindex: 0, role: "region", "aria-label": "Figures side by side" },
        h(
          "table",
          {},
          h("thead", {}, h("tr", {}, h("th", { scope: "col" }, "Figure, with 95 %"), ...all.map(({ name }) => h("th", { scope: "col", class: "number" }, name)))),
          h(
            "tbody",
            {},
            ...names.map((name) =>
              h("tr", {}, h("th", { scope: "row" }, name), ...found.map((figures) => h("td", { class: "figures number" }, cell(figures, name)))),
            ),
          ),
        ),
      ),
    );
  }

  void load();
  return {
    title: "Compared records",
    element,
    update() {},
    close() {
      for (const { source } of all) source.close();
      figure.close();
    },
  };
}
