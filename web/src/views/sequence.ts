// A sequence: pasted or picked, its findings and its shape, rehearsed, started.

import { Refused, type SequenceRequest, daemon, newKey } from "../api/client.ts";
import type { Check, Finding, Rehearsal } from "../api/types.ts";
import type { Bench } from "../core/bench.ts";
import { traceOf } from "../core/curve.ts";
import { type Draft, dutOf, offsets, read } from "../core/draft.ts";
import { ampereHours, degrees, duration, wattHours, words } from "../core/format.ts";
import { keepPrediction } from "../core/prediction.ts";
import { link } from "../core/route.ts";
import { attribute, h, isAbort, reasonOf, show, write } from "../dom.ts";
import { say } from "../parts/announce.ts";
import { margins } from "../parts/margins.ts";
import { Figure } from "../plot/figure.ts";
import { Shape } from "../plot/shape.ts";
import type { View } from "../view.ts";

const KEPT = "draft";
/** After so long without typing the sequence is checked. */
const CHECK_MS = 400;
const POINTS = 1000;

export function sequenceView(): View {
  return new SequencePage();
}

class SequencePage implements View {
  readonly title = "Sequence";
  readonly element: HTMLElement;
  #draft: Draft = read(sessionStorage.getItem(KEPT));
  #sinks: string[] = [];
  #checking: AbortController | null = null;
  #timer = 0;
  /** The sequence as it was rehearsed, and how that went. */
  #rehearsed: { draft: Draft; rehearsal: Rehearsal } | null = null;
  /** One key for one intended start, so that a second tap starts nothing more. */
  #intent: { draft: Draft; key: string } | null = null;

  readonly #text = h("textarea", { id: "text", rows: 22, spellcheck: "false", autocapitalize: "off", autocomplete: "off" });
  readonly #sink = h("select", { id: "sink" });
  readonly #dut = h("input", { id: "dut", autocomplete: "off" });
  readonly #files = h("p", { class: "quiet" });
  readonly #verdict = h("p", { class: "verdict", role: "status" });
  readonly #findings = h("ol", { class: "findings" });
  readonly #shape = new Shape();
  readonly #start = h("button", { type: "button", class: "strong", onclick: () => void this.#begin() }, "Start");
  readonly #rehearse = h("button", { type: "button", class: "plain", onclick: () => void this.#rehearseNow() }, "Rehearse");
  readonly #outcome = h("p", { class: "outcome figures" });
  readonly #bars = margins();
  readonly #predicted = h("section", { hidden: true, "aria-labelledby": "predicted" });
  readonly #figure = new Figure("Rehearsed voltage, current and heat sink temperature", ["voltage", "current", "temperature"], () => undefined);

  constructor() {
    const pick = h("input", {
      type: "file",
      id: "pick",
      multiple: true,
      accept: ".json,.csv,application/json,text/csv",
      onchange: () => void this.#take(Array.from(pick.files ?? [])),
    });
    this.#text.value = this.#draft.text;
    this.#dut.value = this.#draft.dut;
    this.#text.addEventListener("input", () => this.#change({ text: this.#text.value }));
    this.#dut.addEventListener("input", () => this.#change({ dut: this.#dut.value }));
    this.#sink.addEventListener("change", () => this.#change({ sink: this.#sink.value }));
    this.#predicted.append(
      h("h3", { id: "predicted" }, "What the rehearsal says"),
      this.#outcome,
      this.#bars.element,
      this.#figure.element,
    );
    this.element = h(
      "main",
      { id: "main", tabindex: -1, class: "sequence" },
      h("h2", {}, "Sequence"),
      h(
        "div",
        { class: "columns" },
        h(
          "div",
          { class: "writing" },
          h("p", {}, h("label", { for: "pick" }, "Pick the sequence file, with the profiles it names: "), pick),
          this.#files,
          h("label", { for: "text" }, "Or paste it here"),
          this.#text,
        ),
        h(
          "div",
          { class: "judging" },
          h(
            "p",
            { class: "where" },
            h("label", {}, "Sink ", this.#sink),
            h("label", {}, "Device under test ", this.#dut),
          ),
          this.#verdict,
          this.#findings,
          this.#shape.element,
          h("p", { class: "actions" }, this.#rehearse, " ", this.#start),
          h(
            "p",
            { class: "quiet" },
            "Mind the polarity; a fuse and a switch belong in series with the device under test. Lithium cells need supervision that suits them.",
          ),
        ),
      ),
      this.#predicted,
    );
    this.#drawFiles();
    this.#idle();
    this.#soon();
  }

  update(bench: Bench): void {
    const names = bench.sinks.map(({ name }) => name);
    if (names.join("\n") !== this.#sinks.join("\n")) {
      this.#sinks = names;
      this.#sink.replaceChildren(...names.map((name) => h("option", { value: name }, name)));
      const chosen = names.includes(this.#draft.sink) ? this.#draft.sink : (names[0] ?? "");
      this.#sink.value = chosen;
      this.#change({ sink: chosen });
    }
  }

  close(): void {
    clearTimeout(this.#timer);
    this.#checking?.abort();
    this.#shape.close();
    this.#figure.close();
  }

  /** Files that were picked: the one with a sequence in it is the sequence, the others are files
   * that it names. */
  async #take(picked: File[]): Promise<void> {
    const read = await Promise.all(picked.map(async (file) => ({ name: file.name, text: await file.text() })));
    const sequence = read.find(({ text }) => /^\s*\{[^]*"sequence"\s*:/.test(text));
    const others = read.filter((file) => file !== sequence);
    const files = { ...this.#draft.files, ...Object.fromEntries(others.map(({ name, text }) => [name, text])) };
    if (sequence) this.#text.value = sequence.text;
    this.#change({ files, text: this.#text.value });
    this.#drawFiles();
  }

  #drawFiles(): void {
    const names = Object.keys(this.#draft.files);
    write(this.#files, names.length === 0 ? "" : `Files beside it: ${names.join(", ")}`);
    show(this.#files, names.length > 0);
  }

  #change(change: Partial<Draft>): void {
    this.#draft = { ...this.#draft, ...change };
    try {
      sessionStorage.setItem(KEPT, JSON.stringify(this.#draft));
    } catch {
      // A profile too large to be kept is picked again after a reload.
    }
    attribute(this.#dut, "placeholder", dutOf(this.#draft.text));
    this.#soon();
  }

  #idle(): void {
    this.#start.disabled = true;
    this.#rehearse.disabled = true;
  }

  #soon(): void {
    clearTimeout(this.#timer);
    this.#checking?.abort();
    this.#idle();
    this.#timer = window.setTimeout(() => void this.#check(), CHECK_MS);
  }

  #request(): SequenceRequest {
    const { text, files, sink, dut } = this.#draft;
    const request = { sequence: text, files, sink };
    return dut.trim() === "" ? request : { ...request, dut: dut.trim() };
  }

  async #check(): Promise<void> {
    if (this.#draft.text.trim() === "" || this.#draft.sink === "") {
      this.#verdictOf("Nothing to check yet.", []);
      show(this.#shape.element, false);
      return;
    }
    this.#checking = new AbortController();
    try {
      this.#accepted(await daemon.check(this.#request(), this.#checking.signal));
    } catch (error) {
      if (isAbort(error)) return;
      show(this.#shape.element, false);
      if (error instanceof Refused && error.problem.findings) {
        this.#verdictOf("Refused. It may not run:", error.problem.findings);
      } else {
        this.#verdictOf(reasonOf(error), []);
      }
    }
  }

  #accepted(check: Check): void {
    const { forecast } = check;
    const warnings = check.findings.length > 0 ? " Heed:" : "";
    this.#verdictOf(
      `It may run on ${check.sink}: about ${duration(forecast.duration_s)} (at most ${duration(check.duration_at_most_s)}), ${ampereHours(forecast.charge_ah)}, ${wattHours(forecast.energy_wh)}.${warnings}`,
      check.findings,
    );
    show(this.#shape.element, true);
    this.#shape.draw(check.outline);
    this.#start.disabled = false;
    this.#rehearse.disabled = false;
  }

  #verdictOf(text: string, findings: readonly Finding[]): void {
    write(this.#verdict, text);
    this.#findings.replaceChildren(...findings.map((finding) => this.#finding(finding)));
  }

  #finding(finding: Finding): HTMLElement {
    const { place } = finding;
    const where = place ? `line ${place.line}, column ${place.column}` : finding.pointer || "the sequence";
    const go = place
      ? h("button", { type: "button", class: "link", onclick: () => this.#goTo(finding) }, where)
      : h("span", {}, where);
    return h(
      "li",
      { "data-severity": finding.severity },
      h("strong", {}, finding.severity),
      " at ",
      go,
      h("p", {}, finding.message),
      place ? h("pre", { tabindex: 0, "aria-label": "The line" }, `${place.excerpt}\n${" ".repeat(place.caret)}${"^".repeat(Math.max(1, place.width))}`) : null,
      finding.hint !== "" && h("p", { class: "hint" }, finding.hint),
      h("p", { class: "rule quiet" }, words(finding.rule)),
    );
  }

  #goTo(finding: Finding): void {
    if (!finding.place) return;
    const [from, to] = offsets(this.#text.value, finding.place);
    this.#text.focus();
    this.#text.setSelectionRange(from, to);
    const lineHeight = this.#text.scrollHeight / Math.max(1, this.#text.value.split("\n").length);
    this.#text.scrollTop = Math.max(0, (finding.place.line - 4) * lineHeight);
  }

  async #rehearseNow(): Promise<void> {
    const draft = this.#draft;
    this.#rehearse.disabled = true;
    write(this.#rehearse, "Rehearsing …");
    try {
      const rehearsal = await daemon.rehearse({ ...this.#request(), points: POINTS });
      this.#rehearsed = { draft, rehearsal };
      this.#drawRehearsal(rehearsal);
    } catch (error) {
      write(this.#outcome, reasonOf(error));
      show(this.#predicted, true);
    }
    write(this.#rehearse, "Rehearse");
    this.#rehearse.disabled = this.#start.disabled;
  }

  #drawRehearsal(rehearsal: Rehearsal): void {
    const { ending } = rehearsal;
    const why = ending.interlock ? ` (${words(ending.interlock)}${ending.reason ? `: ${ending.reason}` : ""})` : "";
    write(
      this.#outcome,
      `${ending.how}${why} after ${duration(rehearsal.duration_s)}: ${ampereHours(rehearsal.charge_ah)}, ${wattHours(rehearsal.energy_wh)}, heat sink up to ${degrees(rehearsal.peak_temperature_degc)}. It took ${duration(rehearsal.took_s)}.`,
    );
    // It is over: what counts is how near each has come.
    this.#bars.update(
      rehearsal.margins.map((margin) => ({ ...margin, value: margin.worst_value, nearness: margin.worst_nearness })),
    );
    show(this.#predicted, true);
    this.#figure.draw({ against: "time", traces: [traceOf("", rehearsal.curve, "time")], shaded: true, behind: [], labels: [], marks: [] });
    say(`Rehearsed: ${this.#outcome.textContent ?? ""}`);
  }

  async #begin(): Promise<void> {
    const draft = this.#draft;
    if (this.#intent?.draft !== draft) this.#intent = { draft, key: newKey() };
    this.#start.disabled = true;
    try {
      const run = await daemon.start(this.#request(), this.#intent.key);
      if (this.#rehearsed?.draft === draft) keepPrediction(run.id, this.#rehearsed.rehearsal.curve);
      this.#intent = null;
      location.hash = link({ view: "record", id: run.id });
    } catch (error) {
      const findings = error instanceof Refused ? (error.problem.findings ?? []) : [];
      // A refusal starts nothing; the next tap is another intent.
      if (error instanceof Refused) this.#intent = null;
      this.#verdictOf(`Not started: ${reasonOf(error)}.`, findings);
      this.#start.disabled = false;
    }
  }
}
