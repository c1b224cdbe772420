// Groups of records, and what their comparison means in words: pure.
//
// The words say no more than the statistics do. "No difference is shown" is not "they are the
// same", and a difference that is shown may still be too small to matter: that is for the reader.

import type { Compared, Difference, Group } from "../api/types.ts";
import { placesOf, unitOf } from "./figures.ts";
import { fixed, significant } from "./format.ts";
import type { Grouped } from "./route.ts";

export type GroupBy = "kind" | "device" | "sequence";

interface Member {
  id: string;
  dut: string;
  title: string;
  sink: string;
}

/** What a device is called without its number: `K-01` and `K-02` are of one kind. */
export const kindOf = (dut: string): string => dut.replace(/[\s_#.-]*\d+$/, "") || dut;

export function groupNameOf(member: Member, by: GroupBy): string {
  switch (by) {
    case "kind":
      return kindOf(member.dut);
    case "device":
      return member.dut;
    case "sequence":
      return member.title;
  }
}

/** Records by the name that each has been given, in the order of the names' first use. */
export function grouped(names: readonly (readonly [string, string])[]): Grouped[] {
  const groups = new Map<string, string[]>();
  for (const [id, name] of names) groups.set(name, [...(groups.get(name) ?? []), id]);
  return [...groups].map(([name, ids]) => ({ name, ids }));
}

/** What is wrong with groups before any statistics. */
export function cautions(groups: readonly Grouped[], members: readonly Member[]): string[] {
  const of = new Map(members.map((member) => [member.id, member]));
  const found: string[] = [];
  for (const { name, ids } of groups) {
    const here = ids.flatMap((id) => of.get(id) ?? []);
    const repeated = [...new Set(here.map(({ dut }) => dut).filter((dut, index, all) => all.indexOf(dut) !== index))];
    if (repeated.length > 0) {
      found.push(`Group ${name} holds more than one record of ${repeated.join(", ")}: repeats of one device say nothing of how devices differ.`);
    }
    const titles = new Set(here.map(({ title }) => title));
    if (titles.size > 1) found.push(`Group ${name} holds records of ${titles.size} sequences: compare only what was measured alike.`);
  }
  return found;
}

const valueIn = (value: number, places: number, unit: string): string => `${fixed(value, places)}\u00a0${unitOf(unit)}`.trimEnd();

/** Decimals of a value that is known within `half`; no more than measuring can be taken for, and
 * one: what is common to all measurements does not show in a spread. */
function placesIn(half: number, measurement: number | null): number {
  const places = placesOf(half);
  return measurement !== null && measurement > 0 ? Math.min(places, placesOf(measurement) + 1) : places;
}

const halfOf = ([low, high]: readonly [number, number]): number => (high - low) / 2;

/** The mean of a group, to what it is known. */
export function meanOf({ mean, interval, measurement }: Group, unit: string): string {
  const half = interval ? halfOf(interval) : 0;
  const text = half > 0 ? fixed(mean, placesIn(half, measurement)) : significant(mean, 5);
  return `${text}\u00a0${unitOf(unit)}`.trimEnd();
}

export function intervalOf(interval: readonly [number, number], measurement: number | null, unit: string): string {
  const places = placesIn(halfOf(interval), measurement);
  return `${fixed(interval[0], places)} to ${valueIn(interval[1], places, unit)}`;
}

/** What the values cannot tell, each once, with the groups of which it is so. */
export function notesOf(compared: Compared): string[] {
  const found = new Map<string, string[]>();
  for (const { name, notes } of compared.groups) {
    for (const note of notes) found.set(note, [...(found.get(note) ?? []), name]);
  }
  return [...found].map(([note, names]) => `${names.join(", ")}: ${note}`);
}

/** How probable something is, as a person says it. */
export function oddsOf(probability: number): string {
  if (probability < 0.001) return "less than once in 1000 comparisons (p < 0.001)";
  if (probability > 0.2) return `in ${fixed(probability * 100, 0)} of 100 comparisons (p = ${fixed(probability, 2)})`;
  return `about once in ${fixed(1 / probability, 0)} comparisons (p = ${fixed(probability, 3)})`;
}

/** What a difference means. */
export function verdictOf(one: Difference, unit: string): { shown: boolean; headline: string; meaning: string } {
  const [low, high] = one.interval;
  const shown = low > 0 || high < 0;
  const places = placesIn(halfOf(one.interval), one.measurement);
  const value = (each: number): string => valueIn(Math.abs(each), places, unit);
  if (shown) {
    const word = one.difference > 0 ? "higher" : "lower";
    const [least, most] = [Math.min(Math.abs(low), Math.abs(high)), Math.max(Math.abs(low), Math.abs(high))];
    return {
      shown,
      headline: `${one.of} is ${word} than ${one.from} by ${value(one.difference)}; with 95\u00a0%, by ${fixed(least, places)} to ${value(most)}.`,
      meaning: `If the groups did not differ, a difference this large would come up ${oddsOf(one.probability)}.`,
    };
  }
  return {
    shown,
    headline: `No difference between ${one.of} and ${one.from} is shown.`,
    meaning: `${one.of} less ${one.from} is ${valueIn(one.difference, places, unit)}; with 95\u00a0%, anything from ${intervalOf(one.interval, one.measurement, unit)}. Without any difference that much would come up ${oddsOf(one.probability)}. More devices would narrow it.`,
  };
}

/** What measuring hides in a difference; empty where that is nothing worth a word. `oneSink` says
 * that all was measured by one sink. */
export function hiddenOf(one: Difference, unit: string, oneSink: boolean): string {
  const { measurement } = one;
  if (measurement === null || 2 * measurement < Math.abs(one.difference)) return "";
  const about = `${significant(2 * measurement, 2)}\u00a0${unitOf(unit)}`;
  return oneSink
    ? `Measuring alone is uncertain by about ${about}, but by one sink most of that is common to both groups and cancels.`
    : `Measuring alone is uncertain by about ${about}, and the records are of more than one sink: that much may be the sinks' own difference.`;
}

/** Why two groups of a figure are not put against each other. */
export function unableOf(compared: Compared): string {
  if (compared.groups.length < 2) return compared.groups[0] ? `Only group ${compared.groups[0].name} has this figure.` : "";
  const few = compared.groups.filter(({ values }) => values.length < 2).map(({ name }) => name);
  if (few.length > 0) return `One record in ${few.join(" and in ")}: without a spread nothing can be said of a difference. Three of each are little, and the least that helps.`;
  return compared.differences.length === 0 ? "The values do not spread at all: statistics can say nothing of a difference." : "";
}
