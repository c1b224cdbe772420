// What the page knows of the bench, as a fold over what the daemon says. Pure: no clock, no
// network, no document. Bounded: of a sink only the latest is kept, of what happened a page full.

import type { LinkEvent, Run, RunEvent, Sink, SinkList } from "../api/types.ts";
import { words } from "./format.ts";

/** Lines of the chronicle that are kept. */
export const LINES_MAX = 60;

/** How the page's own link to the daemon stands. */
export type Contact =
  | { state: "waiting" }
  | { state: "live" }
  /** Lost since then; what is shown is as old as that. */
  | { state: "lost"; since: number };

/** A line of the chronicle. */
export interface Line {
  id: string;
  at: string;
  sink: string;
  text: string;
  /** The record it belongs to. */
  run: string | null;
  grave: boolean;
}

/** Something to be said aloud by a screen reader. */
export interface Said {
  text: string;
  urgent: boolean;
}

export interface Bench {
  name: string;
  contact: Contact;
  sinks: Sink[];
  /** The last run of a sink that has ended, by the sink's name. */
  ended: Record<string, Run>;
  lines: Line[];
}

export interface Turn {
  bench: Bench;
  said: Said[];
}

export const EMPTY: Bench = {
  name: "",
  contact: { state: "waiting" },
  sinks: [],
  ended: {},
  lines: [],
};

/** The resources as they stand, asked for at the beginning and after a gap. */
export function asked(bench: Bench, list: SinkList, runs: Run[]): Bench {
  const ended: Record<string, Run> = {};
  for (const run of runs) {
    // The latest come first.
    if (run.state === "ended") ended[run.sink] ??= run;
  }
  return { ...bench, name: list.bench, sinks: list.sinks, ended };
}

/** The daemon answers. */
export function contactMade(bench: Bench): Turn {
  const said: Said[] =
    bench.contact.state === "lost" ? [{ text: "The daemon answers again.", urgent: false }] : [];
  return { bench: { ...bench, contact: { state: "live" } }, said };
}

/** The daemon does not answer. */
export function contactLost(bench: Bench, now: number): Turn {
  if (bench.contact.state === "lost") return { bench, said: [] };
  return {
    bench: { ...bench, contact: { state: "lost", since: now } },
    said: [{ text: "No word from the daemon. What is shown may be out of date.", urgent: true }],
  };
}

/** A sink as it is now. A run that is gone from it has ended; its last view is kept. */
export function sinkHeard(bench: Bench, sink: Sink): Bench {
  const known = bench.sinks.some((one) => one.name === sink.name);
  const sinks = known
    ? bench.sinks.map((one) => (one.name === sink.name ? sink : one))
    : [...bench.sinks, sink];
  return { ...bench, sinks };
}

/** Something happened to a run. */
export function runHeard(bench: Bench, id: string, event: RunEvent): Turn {
  const kind = typeof event.news === "string" ? event.news : (Object.keys(event.news)[0] ?? "");
  // Steps are many and are seen in the row; the chronicle is for what one would write down.
  if (kind === "step") return { bench, said: [] };
  const how = endingOf(event);
  const grave = event.calls_for_person || kind === "crossed" || how === "tripped";
  const line: Line = {
    id,
    at: event.at,
    sink: event.sink,
    text: event.message,
    run: event.run,
    grave,
  };
  return {
    bench: withLine(bench, line),
    said: [{ text: sentence(event.message), urgent: grave || how === "interrupted" }],
  };
}

function endingOf(event: RunEvent): string | null {
  if (typeof event.news === "string") return null;
  const ended = event.news["ended"];
  if (typeof ended !== "object" || ended === null || !("how" in ended)) return null;
  return String(ended.how);
}

/** Something happened to a link. */
export function linkHeard(bench: Bench, id: string, event: LinkEvent): Turn {
  const text = linkText(event);
  const grave = event.state !== "connected";
  const line: Line = { id, at: event.at, sink: event.sink, text, run: null, grave };
  return { bench: withLine(bench, line), said: [{ text: sentence(text), urgent: grave }] };
}

export function linkText(event: { sink: string; state: string; reason: string | null }): string {
  const reason = event.reason === null ? "" : `: ${event.reason}`;
  switch (event.state) {
    case "connected":
      return `${event.sink}: the link stands`;
    case "refused":
      return `${event.sink}: another sink is on the link${reason}`;
    default:
      return `${event.sink}: the link is lost${reason}`;
  }
}

/** A run that has ended, as the daemon has it. */
export function runEnded(bench: Bench, run: Run): Bench {
  return { ...bench, ended: { ...bench.ended, [run.sink]: run } };
}

function withLine(bench: Bench, line: Line): Bench {
  if (bench.lines.some((one) => one.id === line.id)) return bench;
  return { ...bench, lines: [line, ...bench.lines].slice(0, LINES_MAX) };
}

const sentence = (text: string): string => (text.endsWith(".") ? text : `${text}.`);

/** What a sink does, in a word, so that no colour has to say it. */
export function standing(sink: Sink): string {
  if (sink.link.state === "lost") return "link lost";
  if (sink.link.state === "refused") return "another sink on the link";
  if (sink.latched_by !== null && sink.run === null) return `tripped: ${words(sink.latched_by)}`;
  if (sink.run) return sink.run.state;
  if (sink.link.state === "greeting") return "connecting";
  return "off";
}

/** Whether a sink draws current, or may. */
export function mayDraw(sink: Sink): boolean {
  if (sink.run !== null && sink.run.state !== "ended") return true;
  if (sink.link.state !== "connected") return sink.reading?.state === "on";
  return sink.reading !== null && ["on", "saturated"].includes(sink.reading.state);
}
