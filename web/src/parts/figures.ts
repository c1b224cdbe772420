// Figures of a record, each with its uncertainty and its method.

import type { Figure } from "../api/types.ts";
import { fixed, significant } from "../core/format.ts";
import { h } from "../dom.ts";

const UNITS: Record<string, string> = { ohm: "Ω", degC: "°C", "1": "" };
/** Figures shown at once: a record of pulses has hundreds, and the report has all. */
export const FIGURES_MAX = 40;

export const unitOf = (unit: string): string => UNITS[unit] ?? unit;

/** What a figure is of, with the step it belongs to. */
export function nameOf(figure: Figure): string {
  const name = figure.name.replaceAll("_", " ");
  const label = figure.label ? `, ${figure.label}` : "";
  const which = figure.occurrence ? ` ${figure.occurrence}` : "";
  return name.charAt(0).toUpperCase() + name.slice(1) + label + which;
}

/** Value and expanded uncertainty, to two digits of the uncertainty (JCGM 100, 7.2.6). */
export function valueOf(figure: Figure): string {
  const unit = unitOf(figure.unit);
  const { expanded } = figure;
  if (!expanded || !(expanded.half_width > 0)) return `${significant(figure.value, 5)} ${unit}`;
  const digits = Math.min(9, Math.max(0, 1 - Math.floor(Math.log10(expanded.half_width))));
  return `${fixed(figure.value, digits)} ± ${fixed(expanded.half_width, digits)} ${unit}`;
}

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
