// The figures of some records side by side, each with its uncertainty.

import type { Figure } from "../api/types.ts";
import { nameOf, valueOf } from "../core/figures.ts";
import { h } from "../dom.ts";

/** A column a record; `shown` are the names of the figures that are. */
export function sideBySide(names: readonly string[], found: readonly (readonly Figure[])[], shown: readonly string[]): HTMLElement | null {
  const rows = [...new Set(found.flat().filter(({ name }) => shown.includes(name)).map(nameOf))];
  if (rows.length === 0) return null;
  const cell = (figures: readonly Figure[], name: string): string => {
    const figure = figures.find((one) => nameOf(one) === name);
    return figure ? valueOf(figure) : "–";
  };
  return h(
    "div",
    {},
    h("h3", {}, "Figures side by side"),
    h(
      "div",
      { class: "scroll", tabindex: 0, role: "region", "aria-label": "Figures side by side" },
      h(
        "table",
        {},
        h("thead", {}, h("tr", {}, h("th", { scope: "col" }, "Figure, with 95 %"), ...names.map((name) => h("th", { scope: "col", class: "number" }, name)))),
        h(
          "tbody",
          {},
          ...rows.map((name) => h("tr", {}, h("th", { scope: "row" }, name), ...found.map((figures) => h("td", { class: "figures number" }, cell(figures, name))))),
        ),
      ),
    ),
  );
}
