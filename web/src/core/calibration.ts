// What a calibration is asked for with, and its numbers as a person reads them: pure.

import type { Calibration, Certificate, CertificateLine } from "../api/types.ts";
import { placesOf } from "./figures.ts";
import { amperes, fixed, significant } from "./format.ts";

/** Shares of the largest current: more of them at the bottom, where a sink errs most of its
 * reading, and none at the very top, where a sink that errs runs into its limit. */
const SHARES = [0.01, 0.03, 0.07, 0.15, 0.25, 0.4, 0.55, 0.7, 0.8, 0.9] as const;

/** Setpoints for a sink of a largest current, as text. */
export function proposed(current_max_a: number): string {
  return SHARES.map((share) => {
    const milliamperes = Number((current_max_a * share * 1000).toPrecision(2));
    return milliamperes >= 1000 ? `${milliamperes / 1000} A` : `${milliamperes} mA`;
  }).join(", ");
}

/** Setpoints as they are written: with their units, between commas or on lines. */
export const setpointsOf = (text: string): string[] =>
  text.split(/[,;\n]/).map((one) => one.trim()).filter((one) => one !== "");

/** What a person is to do now. */
export function guideOf({ state, point, points, setpoint_a, waits_for, verifies }: Calibration): string {
  const held = `Point ${point} of ${points}: ${amperes(setpoint_a)} nominal.`;
  switch (state) {
    case "settling":
      return `${held} It settles${waits_for ? `: ${waits_for}` : ""}.`;
    case "settled":
      return `${held} Settled: read the meters.`;
    case "taken":
      return `All points are taken, and the sink rests at 0 A. Finish it to ${verifies ? "judge the certificate" : "fit and write the certificate"}.`;
    case "ended":
      return "The run has ended before all points were taken. What was taken can still be finished.";
    case "finished":
      return "Finished.";
  }
}

const VALIDITY: Record<Certificate["validity"], string> = { valid: "valid", expired: "expired", not_yet: "not valid yet" };
export const validityOf = ({ validity }: Certificate): string => VALIDITY[validity];

/** A small quantity with its digits: a sink reads in microunits. */
export function small(value: number, unit: string): string {
  const size = Math.abs(value);
  if (size < 0.000995) return `${fixed(value * 1e6, 1)}\u00a0µ${unit}`;
  if (size < 0.0995) return `${fixed(value * 1e3, 2)}\u00a0m${unit}`;
  return `${fixed(value, 4)}\u00a0${unit}`;
}

/** What a meter's reading with its unit comes to; null where only the daemon can read it. */
export function meterValue(text: string): number | null {
  const found = /^([-+]?\d*\.?\d+)\s*(u|µ|m)?[AV]$/.exec(text.trim());
  if (!found) return null;
  const scale = found[2] === undefined ? 1 : found[2] === "m" ? 1e-3 : 1e-6;
  return Number(found[1]) * scale;
}

/** A value with the uncertainty that it is known with. */
const within = (value: number, uncertainty: number, unit: string): string =>
  uncertainty > 0
    ? `${fixed(value, placesOf(uncertainty))} ± ${fixed(uncertainty, placesOf(uncertainty))}${unit}`
    : `${significant(value, 6)}${unit}`;

/** A line's correction: offset and slope, each with its standard uncertainty. */
export function lineOf(line: CertificateLine): { offset: string; slope: string; residual: string; range: string; note: string } {
  const unit = `\u00a0${line.unit}`;
  const notes: string[] = [];
  if (line.bent) notes.push("the residuals ask for a bend");
  if (line.outliers.length > 0) notes.push(`farther off than expected: point ${line.outliers.join(", ")}`);
  if (line.points < 5) notes.push(`${line.points} points show little`);
  return {
    offset: within(line.offset, line.offset_uncertainty, unit),
    slope: within(line.slope, line.slope_uncertainty, ""),
    residual: small(line.largest_residual, line.unit),
    range: `${significant(line.range[0], 3)} to ${significant(line.range[1], 4)}${unit}`,
    note: notes.join("; "),
  };
}

/** How a certificate has moved since the one before of the same sink. */
export function driftOf({ drift }: Certificate): string {
  if (drift.length === 0) return "no earlier one to compare with";
  const moved = drift.filter(({ significant: is }) => is);
  if (moved.length === 0) return "no more than the uncertainties explain";
  const worst = [...moved].sort((one, other) => Math.abs(other.normalised_change) - Math.abs(one.normalised_change))[0];
  if (!worst) return "";
  const unit = worst.channel.startsWith("voltage") ? "V" : "A";
  return `${worst.channel} has moved by ${small(worst.change_micro / 1e6, unit)} at ${small(worst.at_micro / 1e6, unit)}, more than the uncertainties explain (E\u2099 = ${fixed(worst.normalised_change, 1)}): look for a warm or loose connection first`;
}
