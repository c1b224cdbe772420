// Groups of records, figure by figure: every value, the mean with its interval, and what the
// difference of two groups means in words. Told by shape and word, never by colour.

import type { Compared, Comparison, Group } from "../api/types.ts";
import { nameOf, placesOf, unitOf } from "../core/figures.ts";
import { fixed, significant } from "../core/format.ts";
import { hiddenOf, intervalOf, meanOf, notesOf, unableOf, verdictOf } from "../core/groups.ts";
import { h } from "../dom.ts";

/** Figures that make sense side by side without more ado, in this order. */
export const FIRST = ["capacity", "energy", "mean_voltage", "delivered_charge", "dc_resistance", "duration", "peak_temperature"];
/** Shown at once of those: pulses by the hundred are folded away. */
const SHOWN_MAX = 12;
/** So many differences at 95 %, and one of them is probably chance. */
const MANY = 5;

interface Context {
  /** What a record is called. */
  name: (id: string) => string;
  /** All was measured by one sink. */
  oneSink: boolean;
}

export function contrasts({ comparison, peukert }: Comparison, context: Context): HTMLElement {
  // Of the whole run where there is such a figure, else of its steps.
  const of = (name: string): Compared[] => {
    const named = comparison.figures.filter((figure) => figure.name === name);
    const whole = named.filter(({ label }) => label === null);
    return whole.length > 0 ? whole : named;
  };
  const found = FIRST.flatMap(of);
  const first = (found.length > 0 ? found : comparison.figures).slice(0, SHOWN_MAX);
  const rest = comparison.figures.filter((figure) => !first.includes(figure));
  const differences = comparison.figures.reduce((sum, { differences }) => sum + differences.length, 0);
  return h(
    "div",
    { class: "contrasts" },
    ...first.map((figure) => contrast(figure, context)),
    ...peukert.map(({ group, law }) =>
      h(
        "section",
        { class: "contrast" },
        h("h4", {}, `Peukert's exponent, group ${group}`),
        h(
          "p",
          {},
          h("span", { class: "figures" }, exponentOf(law.exponent)),
          ` from ${law.discharges.length} discharges: t = C / Iⁿ, with C = ${significant(law.capacity_at_one_ampere_ah, 4)} Ah at 1 A. Not to be carried beyond the rates that were measured.`,
        ),
      ),
    ),
    rest.length > 0 &&
      h("details", { class: "farther" }, h("summary", {}, `${rest.length} further figures`), ...rest.map((figure) => contrast(figure, context))),
    differences > MANY &&
      h("p", { class: "note" }, `${differences} differences at 95 %: of twenty where there is none, one seems to be one by chance.`),
    h("p", { class: "quiet" }, `Circles are records, the tick is their mean, the line its 95 % interval. Methods: ${comparison.methods.join("; ")}. No value is dropped.`),
  );
}

const exponentOf = ({ value, standard_uncertainty: u }: { value: number; standard_uncertainty: number }): string =>
  `n = ${fixed(value, placesOf(u))}, standard uncertainty ${significant(u, 2)}`;

function contrast(figure: Compared, { name, oneSink }: Context): HTMLElement {
  const all = figure.groups.flatMap(({ values, interval }) => [...values.map(([, value]) => value), ...(interval ?? [])]);
  const [low, high] = [Math.min(...all), Math.max(...all)];
  const at = (value: number): string => `${high > low ? 4 + (92 * (value - low)) / (high - low) : 50}%`;
  const unable = unableOf(figure);
  const notes = notesOf(figure);
  return h(
    "section",
    { class: "contrast" },
    h("h4", {}, nameOf(figure)),
    h("ul", { class: "groups" }, ...figure.groups.map((group) => row(group, figure.unit, at, name))),
    ...figure.differences.map((one) => {
      const { shown, headline, meaning } = verdictOf(one, figure.unit);
      const hidden = hiddenOf(one, figure.unit, oneSink);
      return h("p", { class: "said", "data-shown": shown }, h("strong", {}, headline), ` ${meaning}`, hidden !== "" && ` ${hidden}`);
    }),
    unable !== "" && h("p", { class: "said" }, unable),
    notes.length > 0 && h("p", { class: "said quiet" }, `${notes.join(". ")}.`),
  );
}

function row(group: Group, unit: string, at: (value: number) => string, name: (id: string) => string): HTMLElement {
  const count = group.values.length;
  const mean = meanOf(group, unit);
  const told = [`${count} ${count === 1 ? "record" : "records"}`];
  if (group.interval) told.push(`95 % interval of the mean ${intervalOf(group.interval, group.measurement, unit)}`);
  if (group.standard_deviation !== null) told.push(`spread s = ${significant(group.standard_deviation, 2)} ${unitOf(unit)}`.trimEnd());
  for (const outlier of group.outliers) told.push(`${name(outlier)} lies far off and stays in`);
  const strip = h("div", { class: "strip", role: "img", "aria-label": `${group.values.map(([id, value]) => `${name(id)} ${significant(value, 5)}`).join(", ")}` });
  const put = (kind: string, value: number, to?: number): void => {
    const mark = h("span", { class: kind });
    mark.style.left = at(value);
    if (to !== undefined) mark.style.right = `calc(100% - ${at(to)})`;
    strip.append(mark);
  };
  if (group.interval) put("strip-interval", ...group.interval);
  put("strip-mean", group.mean);
  for (const [, value] of group.values) put("strip-value", value);
  return h(
    "li",
    {},
    h("span", { class: "group-name" }, group.name),
    strip,
    h("span", { class: "figures number" }, mean),
    h("span", { class: "told quiet" }, told.join("; "), "."),
  );
}
