// Two or more records in one plot, their figures side by side, and what groups of them show.

import { daemon } from "../api/client.ts";
import type { Figure as FigureOf, RecordSummary } from "../api/types.ts";
import { type Against, type Range, timeOf, traceOf } from "../core/curve.ts";
import { cautions } from "../core/groups.ts";
import { namesOf } from "../core/records.ts";
import { type Grouped, link } from "../core/route.ts";
import { attribute, h, reasonOf, show, write } from "../dom.ts";
import { choice } from "../parts/choice.ts";
import { FIRST, contrasts } from "../parts/contrast.ts";
import { groupsOf } from "../parts/groups.ts";
import { sideBySide } from "../parts/side_by_side.ts";
import { Figure } from "../plot/figure.ts";
import { Source } from "../plot/source.ts";
import type { View } from "../view.ts";

interface One {
  summary: RecordSummary;
  name: string;
  source: Source;
}

export function compareView(given: readonly Grouped[]): View {
  let against: Against = "charge";
  let all: One[] = [];
  let asked = 0;
  const said = h("p", { class: "quiet", role: "status" }, "Reading the records …");
  const chosen = h("div");
  const shown = h("section", { "aria-labelledby": "shown", hidden: true }, h("h3", { id: "shown" }, "What the groups show"));
  const statistics = h("div", { "aria-live": "polite" });
  shown.append(statistics);
  const table = h("div");
  const figure = new Figure("Voltage, current and heat sink temperature of the records", ["voltage", "current", "temperature"], (range) =>
    void detail(range),
  );
  const element = h(
    "main",
    { id: "main", tabindex: -1 },
    h("h2", {}, "Compared"),
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
    chosen,
    shown,
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
      const ids = given.flatMap((group) => group.ids);
      const summaries = await Promise.all(ids.map(async (id) => (await daemon.record(id)).summary));
      const names = namesOf(summaries);
      all = summaries.map((summary, index) => ({ summary, name: names[index] ?? summary.dut, source: new Source(summary.id) }));
      const groups = groupsOf(summaries, names, given, () => {
        const now = groups.now();
        // The address says it, and can be sent to a colleague.
        history.replaceState(null, "", link({ view: "compare", groups: now }));
        void compare(now);
      });
      chosen.replaceChildren(groups.element);
      await Promise.all(all.map(({ source }) => source.whole(figure.points)));
      write(said, "");
      draw();
      await Promise.all([compare(groups.now()), figures()]);
    } catch (error) {
      write(said, reasonOf(error));
    }
  }

  async function compare(groups: readonly Grouped[]): Promise<void> {
    asked += 1;
    const mine = asked;
    show(shown, true);
    attribute(shown, "aria-busy", "true");
    const summaries = all.map(({ summary }) => summary);
    let content: HTMLElement;
    try {
      const name = (id: string): string => all.find(({ summary }) => summary.id === id)?.name ?? id;
      content = contrasts(await daemon.comparison(groups), { name, oneSink: new Set(summaries.map(({ sink }) => sink)).size === 1 });
    } catch (error) {
      content = h("p", { class: "note" }, reasonOf(error));
    }
    if (mine !== asked) return;
    statistics.replaceChildren(...cautions(groups, summaries).map((text) => h("p", { class: "note" }, text)), content);
    attribute(shown, "aria-busy", null);
  }

  async function figures(): Promise<void> {
    const found = await Promise.all(
      all.map(({ summary }) => daemon.figures(summary.id).then((one) => one.figures, () => [] as FigureOf[])),
    );
    const made = sideBySide(all.map(({ name }) => name), found, FIRST);
    if (made) table.replaceChildren(made);
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
