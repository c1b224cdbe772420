// Figures as a person reads them: named, and with as many digits as are known. Pure.

import type { Figure } from "../api/types.ts";
import { fixed, significant } from "./format.ts";

const UNITS: Record<string, string> = { ohm: "Ω", degC: "°C", "1": "" };

export const unitOf = (unit: string): string => UNITS[unit] ?? unit;

/** What a figure is of, with the step it belongs to. */
export function nameOf(figure: Pick<Figure, "name" | "label" | "occurrence">): string {
  const name = figure.name.replaceAll("_", " ");
  const label = figure.label ? `, ${figure.label}` : "";
  const which = figure.occurrence ? ` ${figure.occurrence}` : "";
  return name.charAt(0).toUpperCase() + name.slice(1) + label + which;
}

/** Decimals to the second digit of an uncertainty (JCGM 100, 7.2.6). */
export const placesOf = (uncertainty: number): number =>
  uncertainty > 0 ? Math.min(9, Math.max(0, 1 - Math.floor(Math.log10(uncertainty)))) : 6;

/** Value and expanded uncertainty. */
export function valueOf(figure: Figure): string {
  const unit = unitOf(figure.unit);
  const { expanded } = figure;
  if (!expanded || !(expanded.half_width > 0)) return `${significant(figure.value, 5)} ${unit}`;
  const places = placesOf(expanded.half_width);
  return `${fixed(figure.value, places)} ± ${fixed(expanded.half_width, places)} ${unit}`;
}
