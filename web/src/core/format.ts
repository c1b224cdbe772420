// Quantities, times and words as a person reads them: every figure with its unit, a real minus
// sign, and figures that keep their width while they change.

import type { Clock, Margin } from "../api/types.ts";

/** Between a number and its unit: never broken. */
const GAP = "\u00a0";
const MINUS = "\u2212";
/** What stands where nothing is known. */
export const UNKNOWN = "\u2013";

const finite = (value: number | null | undefined): value is number =>
  value !== null && value !== undefined && Number.isFinite(value);

/** A number with so many decimals; never "-0". */
export function fixed(value: number, decimals: number): string {
  const text = Math.abs(value).toFixed(decimals);
  return value < 0 && Number(text) !== 0 ? MINUS + text : text;
}

/** A number with so many significant digits, without an exponent. */
export function significant(value: number, digits: number): string {
  if (value === 0) return "0";
  const magnitude = Math.floor(Math.log10(Math.abs(value)));
  return fixed(value, Math.min(9, Math.max(0, digits - 1 - magnitude)));
}

export function quantity(value: number | null | undefined, decimals: number, unit: string): string {
  return finite(value) ? fixed(value, decimals) + GAP + unit : UNKNOWN;
}

export const volts = (value: number | null | undefined): string => quantity(value, 3, "V");
export const watts = (value: number | null | undefined): string => quantity(value, 3, "W");
export const degrees = (value: number | null | undefined): string => quantity(value, 1, "°C");
export const ampereHours = (value: number | null | undefined): string => quantity(value, 4, "Ah");
export const wattHours = (value: number | null | undefined): string => quantity(value, 3, "Wh");

/** A current; below 100 mA in milliamperes, so that a sleep current has digits. */
export function amperes(value: number | null | undefined): string {
  if (!finite(value)) return UNKNOWN;
  if (Math.abs(value) < 0.0995) return quantity(value * 1000, 1, "mA");
  return quantity(value, 3, "A");
}

/** A value of an interlock in its own unit. */
export function ofInterlock(value: number, unit: string): string {
  switch (unit) {
    case "degC":
      return degrees(value);
    case "W":
      return watts(value);
    case "V":
      return volts(value);
    case "A":
      return amperes(value);
    case "Ah":
      return ampereHours(value);
    case "Wh":
      return wattHours(value);
    case "s":
      return duration(value);
    default:
      return significant(value, 3);
  }
}

/** How an interlock stands, in words: now, the limit, the worst so far. */
export function standing(margin: Margin): string {
  if (margin.interlock === "sensor_fault") {
    // Nothing between sound and faulty: there is no value to give.
    return margin.worst_nearness >= 1 ? "faulty" : "none so far";
  }
  const [value, limit] = [margin.value, margin.threshold].map((each) => ofInterlock(each, margin.unit));
  return `${value} of ${limit}; worst ${percent(Math.max(0, margin.worst_nearness))}`;
}

/** Two values of an interlock with as many digits as it takes to tell them apart. */
export function toldApart(value: number, limit: number, unit: string): [string, string] {
  const usual: [string, string] = [ofInterlock(value, unit), ofInterlock(limit, unit)];
  if (usual[0] !== usual[1] || value === limit) return usual;
  const symbol = unit === "degC" ? "°C" : unit;
  for (let digits = 4; digits <= 9; digits += 1) {
    const [one, other] = [significant(value, digits), significant(limit, digits)];
    if (one !== other) return [`${one}${GAP}${symbol}`, `${other}${GAP}${symbol}`];
  }
  return usual;
}

export function percent(share: number): string {
  return `${fixed(share * 100, 0)}${GAP}%`;
}

/** A length of time in its two largest units. */
export function duration(seconds: number | null | undefined): string {
  if (!finite(seconds)) return UNKNOWN;
  if (seconds < 0) return MINUS + duration(-seconds);
  if (seconds < 0.0995) return quantity(seconds * 1000, seconds < 0.00995 ? 1 : 0, "ms");
  if (seconds < 9.995) return quantity(seconds, 2, "s");
  if (seconds < 59.95) return quantity(seconds, 1, "s");
  const whole = Math.round(seconds);
  const [days, hours] = [Math.floor(whole / 86_400), Math.floor((whole % 86_400) / 3600)];
  const [minutes, rest] = [Math.floor((whole % 3600) / 60), whole % 60];
  if (days > 0) return `${days}${GAP}d ${hours}${GAP}h`;
  if (hours > 0) return `${hours}${GAP}h ${pad(minutes)}${GAP}min`;
  return `${minutes}${GAP}min ${pad(rest)}${GAP}s`;
}

const pad = (value: number): string => String(value).padStart(2, "0");

/** The time of day, in the viewer's own zone. */
export function timeOfDay(at: Date, withSeconds = false): string {
  if (Number.isNaN(at.getTime())) return UNKNOWN;
  const text = `${pad(at.getHours())}:${pad(at.getMinutes())}`;
  return withSeconds ? `${text}:${pad(at.getSeconds())}` : text;
}

/** A day, as ISO 8601 has it. */
export function day(at: Date): string {
  if (Number.isNaN(at.getTime())) return UNKNOWN;
  return `${at.getFullYear()}-${pad(at.getMonth() + 1)}-${pad(at.getDate())}`;
}

export const moment = (at: Date): string => `${day(at)} ${timeOfDay(at)}`;

/** When a run will probably end, on its own clock; with the day where that is another one. */
export function expectedEnd(now: string, elapsed_s: number, expected_s: number): string {
  const left = expected_s - elapsed_s;
  if (!(left > 0)) return "";
  const from = new Date(now);
  const end = new Date(from.getTime() + left * 1000);
  return day(end) === day(from) ? timeOfDay(end) : moment(end);
}

/** The name of an interlock, an ending, a rule: words instead of a code. */
export function words(code: string): string {
  return code.replaceAll("_", "-");
}

/** Whose time a run was on, where it was not the calendar's. */
export function clockNote(clock: Clock, factor: number | null = null): string {
  switch (clock) {
    case "real":
      return "";
    case "time_lapse":
      return factor !== null && factor > 1 ? `simulated, ${factor} times faster` : "simulated";
    case "virtual":
      return "rehearsal";
  }
}
