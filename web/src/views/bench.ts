// The bench: one row a sink, and below it what happened.

import { daemon } from "../api/client.ts";
import type { Crossing, Run, Sink } from "../api/types.ts";
import { type Bench, type Line, linkText, standing } from "../core/bench.ts";
import {
  clockNote,
  duration,
  expectedEnd,
  timeOfDay,
  toldApart,
  words,
} from "../core/format.ts";
import { link } from "../core/route.ts";
import { List, type Part, attribute, h, reasonOf, show, write } from "../dom.ts";
import { say } from "../parts/announce.ts";
import { margins } from "../parts/margins.ts";
import { readingList } from "../parts/readings.ts";
import type { View } from "../view.ts";

export function benchView(): View {
  const rows = h("div", { class: "sinks" });
  const sinks = new List<Sink>(rows, (sink) => sink.name, row);
  let ended: Bench["ended"] = {};
  const lines = h("ol", { class: "chronicle" });
  const chronicle = new List<Line>(lines, (line) => line.id, chronicleLine);
  const nothing = h("p", { class: "quiet" }, "Nothing has happened since this page was opened.");
  const element = h(
    "main",
    { id: "main", tabindex: -1 },
    h("h2", { class: "unseen" }, "Sinks"),
    rows,
    h(
      "section",
      { "aria-labelledby": "chronicle" },
      h("h2", { id: "chronicle" }, "What happened"),
      nothing,
      lines,
    ),
  );

  /** A sink's row. */
  function row(first: Sink): Part<Sink> {
    const title = h("h3", { id: `sink-${first.name}` }, first.name);
    const state = h("p", { class: "state" });
    const what = h("p", { class: "what" });
    const course = h("p", { class: "course figures" });
    const trouble = h("p", { class: "trouble" });
    const reset = h(
      "button",
      { type: "button", class: "plain", onclick: () => void clearLatch(first.name) },
      "Reset",
    );
    const readings = readingList(() => ended);
    const bars = margins();
    const element = h(
      "article",
      { class: "sink", "aria-labelledby": title.id },
      h("header", {}, title, state),
      h("div", { class: "sink-body" }, what, course, trouble, reset, readings.element, bars.element),
    );
    attribute(reset, "aria-label", `Reset ${first.name}`);
    return {
      element,
      update(sink) {
        const last = ended[sink.name];
        write(state, standing(sink));
        attribute(element, "data-latched", sink.latched_by !== null && sink.run === null);
        what.replaceChildren(...whatOf(sink, last));
        write(course, sink.run ? courseOf(sink, sink.run) : endOf(last));
        show(course, course.textContent !== "");
        const text = troubleOf(sink, last);
        write(trouble, text);
        show(trouble, text !== "");
        show(reset, sink.latched_by !== null && sink.run === null);
        readings.update(sink);
        bars.update(sink.run?.margins ?? []);
        show(bars.element, (sink.run?.margins.length ?? 0) > 0);
      },
    };
  }

  return {
    title: "Bench",
    element,
    update(bench) {
      ended = bench.ended;
      sinks.update(bench.sinks);
      chronicle.update(bench.lines);
      show(nothing, bench.lines.length === 0);
    },
    close() {},
  };
}

async function clearLatch(sink: string): Promise<void> {
  try {
    await daemon.reset(sink);
    say(`${sink} is reset.`);
  } catch (error) {
    say(reasonOf(error), true);
    window.alert(reasonOf(error));
  }
}

/** What runs on which device under test. */
function whatOf(sink: Sink, last: Run | undefined): (Node | string)[] {
  const run = sink.run ?? last;
  if (!run) return [h("span", { class: "quiet" }, "Nothing has run since the daemon started.")];
  const to = h("a", { href: link({ view: "record", id: run.id }) }, run.dut);
  const note = clockNote(run.clock, sink.link.time_factor);
  const lead = sink.run ? "" : "last: ";
  return [lead, to, h("span", { class: "title" }, run.title), note && h("span", { class: "quiet" }, note)].filter(
    (part) => part !== "",
  );
}

function courseOf(sink: Sink, run: Run): string {
  const parts: string[] = [];
  if (run.step?.label) parts.push(run.step.label);
  for (const round of run.repeats) {
    const of = round.times === null ? "" : ` of ${round.times}`;
    parts.push(`${round.label ?? "round"} ${round.round}${of}`);
  }
  parts.push(`${duration(run.elapsed_s)} of about ${duration(run.expected_s)}`);
  const end = expectedEnd(sink.at, run.elapsed_s, run.expected_s);
  if (end !== "") parts.push(`ends about ${end}`);
  return parts.join(" · ");
}

function endOf(run: Run | undefined): string {
  if (!run?.ending) return "";
  return `${run.ending.how} after ${duration(run.elapsed_s)}, ${timeOfDay(new Date(run.ending.at))}`;
}

/** What is wrong with a sink, with the number and the limit. */
function troubleOf(sink: Sink, last: Run | undefined): string {
  if (sink.link.state === "lost" || sink.link.state === "refused") {
    return linkText({ sink: sink.name, ...sink.link });
  }
  if (sink.run !== null || sink.latched_by === null) {
    const crossing = sink.run?.crossings[0];
    return crossing ? crossingText(crossing) : "";
  }
  const crossing = last?.crossings.find((one) => one.interlock === sink.latched_by);
  if (crossing) return crossingText(crossing);
  const reason = last?.ending?.reason;
  return `Tripped: ${words(sink.latched_by)}${reason ? `, ${reason}` : ""}.`;
}

function crossingText(crossing: Crossing): string {
  const [value, limit] = toldApart(crossing.value, crossing.threshold, crossing.unit);
  const who = crossing.by_sink ? "; the sink itself acted first" : "";
  return `Tripped: ${words(crossing.interlock)}, ${value} where ${limit} is the limit${who}.`;
}

function chronicleLine(line: Line): Part<Line> {
  const text = line.run
    ? h("a", { href: link({ view: "record", id: line.run }) }, line.text)
    : h("span", {}, line.text);
  const element = h(
    "li",
    { "data-grave": line.grave },
    h("time", { class: "figures", datetime: line.at }, timeOfDay(new Date(line.at))),
    h("span", {}, line.grave ? h("strong", { "aria-label": "Attention: " }, "! ") : null, text),
  );
  return { element, update() {} };
}
