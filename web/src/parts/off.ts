// Off, for each sink and for all: always in view, without a question, one request each time.

import { daemon } from "../api/client.ts";
import type { Off, Sink } from "../api/types.ts";
import { type Bench, mayDraw } from "../core/bench.ts";
import { amperes, duration } from "../core/format.ts";
import { List, type Part, attribute, h, reasonOf, write } from "../dom.ts";
import { say } from "./announce.ts";

const ALL = "every sink";

/** The strip of buttons. */
export function offStrip(): Part<Bench> {
  const all = button(null);
  const each = h("div", { class: "off-each" });
  const list = new List<Sink>(each, (sink) => sink.name, (sink) => button(sink.name));
  const answer = h("p", { class: "off-answer" });
  const element = h("section", { class: "off", "aria-label": "Off" }, all.element, each, answer);

  function button(sink: string | null): Part<Sink> {
    const note = h("span", { class: "off-note", "aria-hidden": "true" });
    const made = h(
      "button",
      {
        type: "button",
        class: sink === null ? "off-all" : "off-one",
        onclick: () => void turnOff(sink),
      },
      h("span", { class: "off-word" }, "Off"),
      " ",
      h("span", { class: "off-name" }, sink ?? ALL),
      note,
    );
    return {
      element: made,
      update(now) {
        const draws = mayDraw(now);
        const current = now.reading ? amperes(now.reading.current_a) : "";
        write(note, draws ? current : "");
        attribute(made, "data-draws", draws);
      },
    };
  }

  async function turnOff(sink: string | null): Promise<void> {
    write(answer, `Off: ${sink ?? ALL} …`);
    try {
      told(await daemon.off(sink));
    } catch (error) {
      const text = `Off: ${reasonOf(error)}. In danger, cut the circuit by hand.`;
      write(answer, text);
      say(text, true);
    }
  }

  function told(offs: Off[]): void {
    const parts = offs.map((off) =>
      off.acknowledged ? `${off.sink} is off (${duration(off.took_s)})` : `${off.sink}: ${off.detail ?? ""}`,
    );
    const text = `${parts.join("; ")}.`;
    write(answer, text);
    say(text, offs.some((off) => !off.acknowledged));
  }

  return {
    element,
    update(bench) {
      list.update(bench.sinks);
      attribute(element, "data-count", bench.sinks.length);
      attribute(all.element, "data-draws", bench.sinks.some(mayDraw));
    },
  };
}
