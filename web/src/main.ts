// The page: keeps what is known of the bench, shows one view of it at a time, and the way to
// turn everything off at any time.

import { Unreachable, daemon } from "./api/client.ts";
import { follow } from "./api/stream.ts";
import type { LinkEvent, RunEvent, Sink } from "./api/types.ts";
import * as fold from "./core/bench.ts";
import { duration, timeOfDay } from "./core/format.ts";
import { type Route, link, parse } from "./core/route.ts";
import type { Message } from "./core/sse.ts";
import { attribute, h, show, write } from "./dom.ts";
import { announce, regions } from "./parts/announce.ts";
import { offStrip } from "./parts/off.ts";
import { tokenDialog } from "./parts/token.ts";
import type { View } from "./view.ts";
import { benchView } from "./views/bench.ts";
import { calibrationView } from "./views/calibration.ts";
import { compareView } from "./views/compare.ts";
import { handView } from "./views/hand.ts";
import { recordView } from "./views/record.ts";
import { recordsView } from "./views/records.ts";
import { sequenceView } from "./views/sequence.ts";

let bench = fold.EMPTY;
let view: View | null = null;
let drawing = false;

const title = h("h1", {}, "Bench");
const contact = h("p", { class: "contact" });
const strip = offStrip();
const NAVIGATION: readonly [string, Route][] = [
  ["Bench", { view: "bench" }],
  ["Sequence", { view: "sequence" }],
  ["By hand", { view: "hand" }],
  ["Records", { view: "records" }],
  ["Calibration", { view: "calibration" }],
];
const links = NAVIGATION.map(([name, route]) => ({
  route,
  element: h("a", { href: link(route) }, name),
}));
const head = h(
  "header",
  { class: "head" },
  h("a", { class: "skip", href: "#main", onclick: skip }, "To the content"),
  title,
  h("nav", { "aria-label": "Pages" }, ...links.map(({ element }) => element)),
  contact,
);
const place = h("div", { class: "place" });
document.body.append(
  head,
  strip.element,
  place,
  h(
    "footer",
    {},
    "The interlocks are a help, not a safety-rated protection. In danger, cut the circuit by hand. ",
    h("a", { href: "/v1/openapi.json" }, "HTTP interface"),
  ),
  tokenDialog(),
  ...regions,
);

function skip(event: Event): void {
  event.preventDefault();
  document.getElementById("main")?.focus();
}

function turn({ bench: next, said }: fold.Turn): void {
  bench = next;
  announce(said);
  draw();
}

/** Shows what is known, once a frame however much comes in. */
function draw(): void {
  if (drawing) return;
  drawing = true;
  requestAnimationFrame(() => {
    drawing = false;
    strip.update(bench);
    view?.update(bench);
    write(title, bench.name === "" ? "Bench" : `Bench ${bench.name}`);
    drawContact();
    drawTitle();
  });
}

/** What the tab itself tells of a page that is not looked at. */
function drawTitle(): void {
  const tripped = bench.sinks.filter((sink) => sink.latched_by !== null && sink.run === null);
  const alarm = bench.contact.state === "lost" ? "! no word from the daemon · " : tripped.length > 0 ? `! ${tripped.map(({ name }) => name).join(", ")} tripped · ` : "";
  const text = alarm + (view?.title ?? "");
  if (document.title !== text) document.title = text;
}

function drawContact(): void {
  const { contact: now } = bench;
  attribute(document.body, "data-contact", now.state);
  show(contact, now.state !== "live");
  if (now.state === "waiting") write(contact, "Asking the daemon …");
  if (now.state === "lost") {
    const since = new Date(now.since);
    const ago = duration(Math.max(1, Math.round((Date.now() - now.since) / 1000)));
    write(
      contact,
      `No word from the daemon since ${timeOfDay(since, true)} (${ago}): what is shown is as old as that. Trying again. A sink in a run that hears nothing turns itself off.`,
    );
  }
}
setInterval(() => bench.contact.state === "lost" && drawContact(), 1000);

/** Between two glances at the bench while nobody looks: the tab's title still tells of a trip, and
 * of a daemon that is gone. */
const GLANCE_MS = 15_000;
setInterval(() => document.visibilityState === "hidden" && void glance(), GLANCE_MS);

async function glance(): Promise<void> {
  try {
    await askAnew();
    turn(fold.contactMade(bench));
  } catch (error) {
    if (error instanceof Unreachable) turn(fold.contactLost(bench, Date.now()));
  }
  // A page out of sight draws nothing, bar its title.
  drawTitle();
}

async function askAnew(): Promise<void> {
  const [list, runs] = await Promise.all([daemon.sinks(), daemon.runs()]);
  bench = fold.asked(bench, list, runs);
  draw();
}

/** The same where the stream stands, whose own loss says it if there is no answer. */
const catchUp = (): Promise<void> => askAnew().catch(() => undefined);

function heard(message: Message): void {
  switch (message.event) {
    case "sink":
      bench = fold.sinkHeard(bench, JSON.parse(message.data) as Sink);
      return draw();
    case "run": {
      const event = JSON.parse(message.data) as RunEvent;
      turn(fold.runHeard(bench, message.id, event));
      if (typeof event.news === "object" && "ended" in event.news) void endedRun(event.run);
      return;
    }
    case "link":
      return turn(fold.linkHeard(bench, message.id, JSON.parse(message.data) as LinkEvent));
    case "gone":
      return void catchUp();
  }
}

/** How a run ended, and which interlock crossed. The daemon keeps it after the sink is free. */
async function endedRun(id: string): Promise<void> {
  for (let tries = 0; tries < 20; tries += 1) {
    try {
      const run = await daemon.run(id);
      if (run.state === "ended") {
        bench = fold.runEnded(bench, run);
        return draw();
      }
    } catch {
      return;
    }
    await new Promise((resolve) => setTimeout(resolve, 100 * (tries + 1)));
  }
}

follow({
  open(resumed) {
    turn(fold.contactMade(bench));
    if (!resumed) void catchUp();
  },
  message: heard,
  lost() {
    turn(fold.contactLost(bench, Date.now()));
  },
});

function make(route: Route): View {
  switch (route.view) {
    case "bench":
      return benchView();
    case "sequence":
      return sequenceView();
    case "hand":
      return handView();
    case "calibration":
      return calibrationView();
    case "records":
      return recordsView();
    case "record":
      return recordView(route.id);
    case "compare":
      return compareView(route.groups);
  }
}

function go(first = false): void {
  const route = parse(location.hash);
  view?.close();
  view = make(route);
  place.replaceChildren(view.element);
  for (const { element, route: own } of links) {
    const here = own.view === route.view;
    attribute(element, "aria-current", here ? "page" : null);
  }
  view.update(bench);
  drawTitle();
  if (first) return;
  window.scrollTo(0, 0);
  // A reader that follows the focus is told of the new view.
  document.getElementById("main")?.focus({ preventScroll: true });
}
window.addEventListener("hashchange", () => go());
go(true);
draw();
