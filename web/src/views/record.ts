// One run, in progress or over: its curve, what happened in it, its figures.

import { Refused, daemon } from "../api/client.ts";
import type { Course, Curve, RecordOne, Run } from "../api/types.ts";
import type { Bench } from "../core/bench.ts";
import { type Against, type Range, timeOf, traceOf } from "../core/curve.ts";
import { clockNote, duration, moment, words } from "../core/format.ts";
import { keepPrediction, predictionOf } from "../core/prediction.ts";
import { h, reasonOf, show, write } from "../dom.ts";
import { say } from "../parts/announce.ts";
import { choice } from "../parts/choice.ts";
import { figuresTable } from "../parts/figures.ts";
import { fileLink } from "../parts/file.ts";
import { margins } from "../parts/margins.ts";
import { Figure } from "../plot/figure.ts";
import { Source } from "../plot/source.ts";
import type { View } from "../view.ts";

/** Between two looks at a run in progress: so long, or so many times what the last look took. */
const LOOK_MS = 1500;
const LOOK_SHARE = 5;
const POINTS_OF_PREDICTION = 1000;

export function recordView(id: string): View {
  return new RecordPage(id);
}

class RecordPage implements View {
  title = "Run";
  readonly element: HTMLElement;
  readonly #source: Source;
  readonly #figure: Figure;
  #against: Against = "time";
  #record: RecordOne | null = null;
  #course: Course = { stretches: [], happenings: [], left_out: 0 };
  #prediction: Curve | null;
  #run: Run | null = null;
  #timer = 0;
  #closed = false;
  #complete = false;

  readonly #heading = h("h2", {}, "Run");
  readonly #about = h("p", { class: "about" });
  readonly #state = h("p", { class: "course figures" });
  readonly #trouble = h("p", { class: "trouble", hidden: true });
  readonly #commands = h("p", { class: "actions", hidden: true });
  readonly #bars = margins();
  readonly #happenings = h("ol", { class: "happenings" });
  readonly #figures = h("section", { "aria-labelledby": "figures", hidden: true });
  readonly #predict = h("div", { class: "predict" });
  readonly #files = h("p", { class: "files" });

  constructor(readonly id: string) {
    this.#source = new Source(id);
    this.#prediction = predictionOf(id);
    this.#figure = new Figure("Voltage, current and heat sink temperature", ["voltage", "current", "temperature"], (range) =>
      void this.#detail(range),
    );
    for (const [text, what] of [
      ["Hold", "hold"],
      ["Continue", "continue"],
      ["Stop", "stop"],
    ] as const) {
      const button = h("button", { type: "button", class: "plain", "data-command": what, onclick: () => void this.#command(what) }, text);
      this.#commands.append(button, " ");
    }
    this.element = h(
      "main",
      { id: "main", tabindex: -1, class: "record" },
      h("header", {}, this.#heading, this.#about, this.#state, this.#trouble, this.#commands),
      this.#bars.element,
      h(
        "div",
        { class: "controls" },
        choice<Against>("Against", [["time", "time"], ["charge", "charge"]], "time", (value) => {
          this.#against = value;
          this.#draw();
        }),
        this.#predict,
      ),
      this.#figure.element,
      this.#happenings,
      this.#figures,
      this.#files,
    );
    this.#offerPrediction();
    void this.#begin();
  }

  update(bench: Bench): void {
    const sink = bench.sinks.find((one) => one.run?.id === this.id);
    const ended = Object.values(bench.ended).find((one) => one.id === this.id);
    const run = sink?.run ?? ended ?? null;
    if (run === null || run === this.#run) return;
    const hadEnded = this.#run?.state === "ended";
    this.#run = run;
    this.#show(run);
    if (run.state === "ended" && !hadEnded) void this.#refresh();
  }

  close(): void {
    this.#closed = true;
    clearTimeout(this.#timer);
    this.#source.close();
    this.#figure.close();
  }

  async #begin(): Promise<void> {
    try {
      this.#record = await daemon.record(this.id);
      this.#head();
    } catch (error) {
      this.#fail(error);
      return;
    }
    await this.#refresh();
  }

  #head(): void {
    if (!this.#record) return;
    const { summary } = this.#record;
    this.title = `${summary.dut}: ${summary.title}`;
    write(this.#heading, summary.dut);
    const note = clockNote(summary.clock);
    write(
      this.#about,
      `${summary.title}. On ${summary.sink}, started ${moment(new Date(summary.started))}${note ? ` (${note})` : ""}.`,
    );
    if (this.#run === null) {
      const { ending } = summary;
      const reason = ending?.reason ? `: ${ending.reason}` : "";
      write(this.#state, ending ? `${ending.how}${reason}` : "in progress, or cut off");
    }
    this.#files.replaceChildren(
      fileLink("Report", daemon.reportPath(this.id), `${summary.folder}.html`, true),
      " · ",
      fileLink("Readbacks (CSV)", `/v1/records/${this.id}/readings`, `${summary.folder}.csv`),
      h("span", { class: "quiet" }, ` · record ${summary.folder}, ${summary.sealed ? "sealed" : "not sealed"}`),
    );
  }

  #show(run: Run): void {
    const inProgress = run.state !== "ended";
    const step = run.step?.label ? `${run.step.label} · ` : "";
    const how = run.ending ? `${run.ending.how} after ` : "";
    const of = inProgress ? ` of about ${duration(run.expected_s)}` : "";
    write(this.#state, `${inProgress ? `${run.state} · ` : ""}${step}${how}${duration(run.elapsed_s)}${of}`);
    const reason = run.ending?.how === "tripped" ? `Tripped: ${words(run.ending.interlock ?? "")}, ${run.ending.reason ?? ""}` : (run.ending?.reason ?? "");
    write(this.#trouble, reason);
    show(this.#trouble, reason !== "");
    show(this.#commands, inProgress);
    for (const button of this.#commands.querySelectorAll("button")) {
      const what = button.dataset["command"];
      button.disabled = (what === "hold" && run.state !== "running") || (what === "continue" && run.state !== "held");
    }
    this.#bars.update(run.margins);
  }

  /** Looks at the whole record anew; again and again while the run is in progress. */
  async #refresh(): Promise<void> {
    if (this.#closed) return;
    clearTimeout(this.#timer);
    const begun = performance.now();
    if (document.visibilityState === "visible") {
      try {
        const [, course] = await Promise.all([this.#source.whole(this.#figure.points), this.#courseNow()]);
        this.#course = course;
        // One picture: where it is zoomed, with the detail.
        const zoomed = this.#figure.zoomed;
        if (zoomed) await this.#detail(zoomed);
        else this.#draw();
      } catch (error) {
        this.#fail(error);
      }
    }
    const took = performance.now() - begun;
    if (this.#source.inProgress || (this.#run !== null && this.#run.state !== "ended")) {
      this.#timer = window.setTimeout(() => void this.#refresh(), Math.max(LOOK_MS, took * LOOK_SHARE));
    } else if (!this.#complete) {
      this.#complete = true;
      void this.#figuresNow();
    }
  }

  async #courseNow(): Promise<Course> {
    try {
      return await daemon.course(this.id);
    } catch (error) {
      if (error instanceof Refused) return this.#course;
      throw error;
    }
  }

  async #figuresNow(): Promise<void> {
    try {
      const { figures, warnings } = await daemon.figures(this.id);
      if (figures.length === 0) return;
      this.#figures.replaceChildren(h("h3", { id: "figures" }, "Figures"), figuresTable(figures, warnings));
      show(this.#figures, true);
      // It has been sealed meanwhile.
      this.#record = await daemon.record(this.id);
      this.#head();
    } catch {
      // A record without figures is shown without.
    }
  }

  /** Another stretch is shown: what is known of it stands there already, more is asked for. */
  async #detail(range: Range | null): Promise<void> {
    const curve = this.#source.curve;
    if (curve === null) return;
    if (range === null) {
      this.#source.forget();
      this.#draw();
      return;
    }
    await this.#figure.whileBusy(async () => {
      try {
        const time = timeOf(traceOf("", curve, this.#against), range);
        if (await this.#source.stretch(time, this.#figure.points)) this.#draw();
      } catch (error) {
        this.#fail(error);
      }
    });
  }

  #draw(): void {
    const { curve } = this.#source;
    if (curve === null) return;
    const main = traceOf("", curve, this.#against);
    const predicted = this.#prediction ? [traceOf("rehearsal", this.#prediction, this.#against)] : [];
    const at = (seconds: number): number =>
      this.#against === "time" ? seconds : (main.x[Math.min(main.x.length - 1, firstAt(main.time, seconds))] ?? 0);
    this.#figure.draw({
      against: this.#against,
      traces: [{ ...main, label: predicted.length > 0 ? "measured" : "" }],
      shaded: true,
      behind: predicted,
      labels: this.#course.stretches.map((stretch) => ({ from: at(stretch.from_s), to: at(stretch.to_s), text: stretch.label ?? "" })),
      marks: this.#course.happenings.map((happening, index) => ({ x: at(happening.at_s), number: index + 1, grave: isGrave(happening.kind) })),
    });
    this.#happenings.replaceChildren(
      ...this.#course.happenings.map(({ at_s, kind, message }) =>
        h("li", { "data-grave": isGrave(kind) }, h("span", { class: "figures" }, duration(at_s)), ` ${message}`),
      ),
    );
  }

  #offerPrediction(source?: unknown): void {
    if (this.#prediction) {
      write(this.#predict, "The rehearsal is drawn behind, dashed.");
      return;
    }
    const button = h("button", { type: "button", class: "plain", onclick: () => void this.#rehearse(source) }, "Rehearse, and draw it behind");
    this.#predict.replaceChildren(button);
  }

  async #rehearse(source?: unknown): Promise<void> {
    if (!this.#record) return;
    write(this.#predict, "Rehearsing …");
    const { summary, manifest } = this.#record;
    const { text, files } = manifest.sequence;
    const body = { sequence: text, files, sink: summary.sink, dut: summary.dut, points: POINTS_OF_PREDICTION };
    try {
      const { curve } = await daemon.rehearse(source === undefined ? body : { ...body, source });
      this.#prediction = curve;
      keepPrediction(this.id, curve);
      this.#offerPrediction();
      this.#draw();
    } catch (error) {
      if (error instanceof Refused && error.problem.code === "source-needed") this.#askForSource();
      else {
        this.#offerPrediction();
        this.#predict.append(` ${reasonOf(error)}`);
      }
    }
  }

  /** A real sink is rehearsed against a simulated source that someone must name. */
  #askForSource(): void {
    const field = h("input", { id: "source", value: '{ "cell": "K" }', spellcheck: "false" });
    const form = h(
      "form",
      {
        class: "inline",
        onsubmit: (event) => {
          event.preventDefault();
          try {
            void this.#rehearse(JSON.parse(field.value));
          } catch {
            field.setCustomValidity("This is no JSON; a cell is written as { \"cell\": \"K\" }.");
            field.reportValidity();
          }
        },
      },
      h("label", { for: "source" }, "Against which simulated source? "),
      field,
      h("button", { type: "submit", class: "plain" }, "Rehearse"),
    );
    field.addEventListener("input", () => field.setCustomValidity(""));
    this.#predict.replaceChildren(form);
    field.focus();
  }

  async #command(what: "hold" | "continue" | "stop"): Promise<void> {
    try {
      await daemon.command(this.id, what);
    } catch (error) {
      this.#fail(error);
    }
  }

  #fail(error: unknown): void {
    if (this.#closed) return;
    write(this.#trouble, reasonOf(error));
    show(this.#trouble, true);
    say(reasonOf(error));
  }
}

const isGrave = (kind: string): boolean => kind === "crossed" || kind === "link_lost" || kind === "tripped";

function firstAt(time: readonly number[], seconds: number): number {
  const found = time.findIndex((at) => at >= seconds);
  return found < 0 ? time.length - 1 : found;
}
