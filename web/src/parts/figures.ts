// Figures of a record, each with its uncertainty and its method.

import type { Figure } from "../api/types.ts";
import { nameOf, valueOf } from "../core/figures.ts";
import { h } from "../dom.ts";

/** Figures shown at once: a record of pulses has hundreds, and the report has all. */
export const FIGURES_MAX = 40;

export function figuresTable(figures: readonly Figure[], warnings: readonly string[]): HTMLElement {
  const rows = figures.slice(0, FIGURES_MAX).map((figure) =>
    h(
      "tr",
      {},
      h("th", { scope: "row" }, nameOf(figure)),
      h("td", { class: "figures number" }, valueOf(figure)),
      h("td", { class: "method" }, figure.method.how, " ", h("cite", {}, figure.method.source)),
    ),
  );
  const more = figures.length - rows.length;
  return h(
    "div",
    {},
    ...warnings.map((warning) => h("p", { class: "note" }, warning)),
    h(
      "div",
      { class: "scroll", tabindex: 0, role: "region", "aria-label": "Table of figures" },
      h(
        "table",
        { class: "figures-table" },
        h("thead", {}, h("tr", {}, ...["Figure", "Value, 95 %", "Method and source"].map((text) => h("th", { scope: "col" }, text)))),
        h("tbody", {}, ...rows),
      ),
    ),
    more > 0 && h("p", { class: "quiet" }, `${more} more figures are in the report.`),
  );
}
