// Which records are meant: pure.

import type { RecordSummary } from "../api/types.ts";

export interface Chosen {
  dut: string;
  label: string;
  ending: string;
}

export const EVERYTHING: Chosen = { dut: "", label: "", ending: "" };

const holds = (text: string, wanted: string): boolean => text.toLowerCase().includes(wanted.trim().toLowerCase());

export function matching(records: readonly RecordSummary[], chosen: Chosen): RecordSummary[] {
  return records.filter(
    (record) =>
      holds(record.dut, chosen.dut) &&
      (chosen.label.trim() === "" || record.labels.some((label) => holds(label, chosen.label))) &&
      (chosen.ending === "" || record.ending?.how === chosen.ending),
  );
}

export const labelsOf = (records: readonly RecordSummary[]): string[] =>
  [...new Set(records.flatMap(({ labels }) => labels))].sort();

/** A name for each of some records that tells them apart: the device, and where that is the same
 * also a number. */
export function namesOf(records: readonly { dut: string }[]): string[] {
  const count = (dut: string): number => records.filter((record) => record.dut === dut).length;
  const seen = new Map<string, number>();
  return records.map(({ dut }) => {
    if (count(dut) === 1) return dut;
    const number = (seen.get(dut) ?? 0) + 1;
    seen.set(dut, number);
    return `${dut} (${number})`;
  });
}
