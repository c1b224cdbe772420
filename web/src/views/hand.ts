// A current held by hand: set, looked at, let go. It lasts as long as someone is at this page.

import { daemon, newKey } from "../api/client.ts";
import type { Run, Sink } from "../api/types.ts";
import type { Bench } from "../core/bench.ts";
import { amperes, duration } from "../core/format.ts";
import { link } from "../core/route.ts";
import { h, show, write } from "../dom.ts";
import { say } from "../parts/announce.ts";
import { Fields, refusal } from "../parts/fields.ts";
import { type HoldingPart, holding } from "../parts/holding.ts";
import { margins } from "../parts/margins.ts";
import { readingList } from "../parts/readings.ts";
import { sourceFields } from "../parts/source.ts";
import type { View } from "../view.ts";

/** The run that this tab holds, so that a reload within the interval goes on. */
const KEPT = "by-hand";

export function handView(): View {
  let run: Run | null = null;
  let hold: HoldingPart | null = null;
  let sinks: readonly Sink[] = [];
  let ended: Bench["ended"] = {};
  let closed = false;
  let wasHeld = sessionStorage.getItem(KEPT);

  const source = sourceFields("hand-source", { kind: "cell", label: "K-01" });
  const how = new Fields("hand-how", "How it is held", [{ name: "interval", label: "Lasts, unless asked for again (1 s to 60 s)", first: "10 s" }]);
  const refused = h("div");
  const begin = h("button", { type: "submit", class: "strong" }, "Take the sink");
  const over = h("p", { class: "verdict", role: "status" });
  const form = h(
    "form",
    { onsubmit: (event) => submitted(event, start) },
    source.element,
    how.element,
    h("p", { class: "actions" }, begin, h("span", { class: "quiet" }, "Begins at 0 A: nothing flows before you set a current.")),
  );

  const title = h("h3", { id: "held" });
  const now = h("p", { class: "what" });
  const status = h("div");
  const current = h("input", { id: "setpoint", autocomplete: "off", inputmode: "text", placeholder: "500 mA" });
  const readings = readingList(() => ended);
  const bars = margins();
  const curve = h("a", { target: "_blank", rel: "noopener" }, "Its curve, in another tab");
  const held = h(
    "section",
    { class: "held", "aria-labelledby": title.id, hidden: true },
    title,
    now,
    status,
    h(
      "form",
      { class: "inline", onsubmit: (event) => submitted(event, () => set(current.value)) },
      h("label", { for: "setpoint" }, "Current "),
      current,
      h("button", { type: "submit", class: "strong" }, "Set"),
      h("button", { type: "button", class: "plain", onclick: () => void set("0 A") }, "Rest at 0 A"),
    ),
    readings.element,
    bars.element,
    h("p", {}, curve),
  );
  const element = h(
    "main",
    { id: "main", tabindex: -1 },
    h("h2", {}, "By hand"),
    h(
      "p",
      { class: "note" },
      "You decide what is drawn, so be there: a fuse and a switch in series with the device, the polarity looked at twice, limits from its data sheet. The current lasts only as long as this page asks for it. Leave the page, close it, let the phone sleep, or touch nothing for ten minutes, and the sink goes off. The bench's interlocks hold. They are no substitute for you.",
    ),
    over,
    form,
    held,
    refused,
  );

  async function start(): Promise<void> {
    begin.disabled = true;
    refused.replaceChildren();
    try {
      const body = { ...source.body(), interval: how.value("interval"), title: "By hand, from the page" };
      took(await daemon.beginByHand(body, newKey()));
      current.focus();
    } catch (error) {
      refused.replaceChildren(refusal("Not begun", error));
    }
    begin.disabled = false;
  }

  function took(next: Run): void {
    const sink = sinks.find(({ name }) => name === next.sink);
    if (closed || !sink) return;
    run = next;
    sessionStorage.setItem(KEPT, next.id);
    hold = holding(next, sink);
    status.replaceChildren(hold.element);
    write(title, `${next.sink} is held for ${next.dut}`);
    curve.href = link({ view: "record", id: next.id });
    write(over, "");
    show(form, false);
    show(held, true);
    draw(sink, next);
  }

  async function set(text: string): Promise<void> {
    if (!run) return;
    refused.replaceChildren();
    try {
      const next = await daemon.setpoint(run.id, text.trim());
      const sink = sinks.find(({ name }) => name === next.sink);
      if (sink) draw(sink, next);
      say(`Set to ${amperes(next.by_hand?.setpoint_a)}.`);
    } catch (error) {
      refused.replaceChildren(refusal("Not set; what was set is held", error));
    }
  }

  function draw(sink: Sink, next: Run): void {
    write(now, `Set to ${amperes(next.by_hand?.setpoint_a)}, for ${duration(next.elapsed_s)}`);
    readings.update(sink);
    bars.update(next.margins);
  }

  function ends(of: Run): void {
    hold?.letGo();
    hold = null;
    run = null;
    sessionStorage.removeItem(KEPT);
    const how = `${of.ending?.how ?? "ended"}${of.ending?.reason ? `, ${of.ending.reason}` : ""}`;
    // A sink that was lost has not said that it is off.
    const lost = of.ending?.how === "interrupted";
    over.replaceChildren(
      lost ? `The run on ${of.sink} has ended: ${how}. A sink that hears nothing turns itself off; in danger, cut the circuit by hand. ` : `${of.sink} is off: ${how}. `,
      h("a", { href: link({ view: "record", id: of.id }) }, "The record"),
    );
    show(held, false);
    show(form, true);
  }

  return {
    title: "By hand",
    element,
    update(bench) {
      ({ sinks, ended } = bench);
      source.update(sinks);
      if (run === null && wasHeld !== null) {
        const found = sinks.find((sink) => sink.run?.id === wasHeld)?.run;
        if (sinks.length > 0) wasHeld = null;
        if (found && found.state === "running") took(found);
      }
      const mine = run;
      if (mine === null) return;
      const sink = sinks.find(({ name }) => name === mine.sink);
      const over = Object.values(ended).find(({ id }) => id === mine.id);
      if (over) return ends(over);
      const here = sink?.run?.id === mine.id ? sink.run : null;
      if (sink && here) draw(sink, here);
      // It ends: there is nothing to be asked for any more.
      if (here === null || here.state === "ending" || here.state === "ended") hold?.letGo();
    },
    close() {
      closed = true;
      hold?.letGo();
      // One leaves: it goes off now, and not only when the interval is over.
      if (run !== null) void daemon.off(run.sink).catch(() => undefined);
      sessionStorage.removeItem(KEPT);
    },
  };
}

function submitted(event: Event, then: () => Promise<void>): void {
  event.preventDefault();
  void then();
}
