// The sequence being written, kept in this tab so that a reload loses nothing. And where in its
// text a finding is.

import type { Place } from "../api/types.ts";

export interface Draft {
  text: string;
  files: Record<string, string>;
  sink: string;
  dut: string;
}

export const BLANK: Draft = { text: "", files: {}, sink: "", dut: "" };

export function read(stored: string | null): Draft {
  if (stored === null) return BLANK;
  try {
    const found: unknown = JSON.parse(stored);
    return typeof found === "object" && found !== null ? { ...BLANK, ...found } : BLANK;
  } catch {
    return BLANK;
  }
}

/** Where a place is in a text, as offsets of its beginning and end. Columns count characters,
 * offsets count UTF-16 units as a text field does. */
export function offsets(text: string, place: Place): [number, number] {
  const lines = text.split("\n");
  const before = lines.slice(0, place.line - 1).reduce((sum, line) => sum + line.length + 1, 0);
  const characters = Array.from(lines[place.line - 1] ?? "");
  const units = (count: number): number => characters.slice(0, count).join("").length;
  const from = before + units(place.column - 1);
  return [from, before + units(place.column - 1 + Math.max(1, place.width))];
}

/** The label that a sequence gives its device under test, where it can be read. */
export function dutOf(text: string): string {
  const found = /"label"\s*:\s*"([^"\\]*)"/.exec(text.slice(Math.max(0, text.indexOf('"dut"'))));
  return text.includes('"dut"') ? (found?.[1] ?? "") : "";
}
