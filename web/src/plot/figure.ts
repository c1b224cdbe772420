// Three panels over one x axis, with zoom and read-off by mouse, finger and keyboard.

import { type Quantity, type Range, type Trace, nearest, scaled, shifted, whole } from "../core/curve.ts";
import { ampereHours, amperes, degrees, duration, volts } from "../core/format.ts";
import { timeTick } from "../core/labels.ts";
import { attribute, h, write } from "../dom.ts";
import { inkOf, onInkChange } from "./ink.ts";
import { type Drawing, NOTHING, Panel, type PanelSpec } from "./panel.ts";
import { pinch } from "./pinch.ts";

const TALL: Record<Quantity, number> = { voltage: 270, current: 150, temperature: 150 };
const AXES: Record<Quantity, [string, number]> = {
  voltage: ["voltage / V", 0.02],
  current: ["current / A", 0.004],
  temperature: ["heat sink / °C", 1],
};
/** Positions of the read-off's slider. */
const POSITIONS = 1000;

let figures = 0;

export class Figure {
  readonly element: HTMLElement;
  #drawing: Drawing = NOTHING;
  #zoom: Range | null = null;
  #busy = 0;
  readonly #panels: Panel[];
  readonly #readOff = h("output", { class: "read-off figures" });
  readonly #slider = h("input", { type: "range", min: 0, max: POSITIONS, value: 0, "aria-label": "Read off" });
  readonly #plots = h("div", { class: "plots" });
  readonly #undo: (() => void)[] = [];

  /** `onZoom` is told of the shown stretch of x, null for all of it. */
  constructor(
    private readonly name: string,
    private readonly quantities: readonly Quantity[],
    private readonly onZoom: (range: Range | null) => void,
  ) {
    const button = (text: string, act: () => void): HTMLElement =>
      h("button", { type: "button", class: "plain", onclick: act }, text);
    this.element = h(
      "figure",
      { class: "figure" },
      this.#plots,
      h("div", { class: "read" }, this.#slider, this.#readOff),
      h(
        "div",
        { class: "zoom", role: "group", "aria-label": "Zoom" },
        button("Zoom in", () => this.#change((range, all) => scaled(range, 0.5, all))),
        button("Zoom out", () => this.#change((range, all) => scaled(range, 2, all))),
        button("Earlier", () => this.#change((range, all) => shifted(range, -0.5, all))),
        button("Later", () => this.#change((range, all) => shifted(range, 0.5, all))),
        button("Whole", () => this.zoom(null)),
      ),
    );
    this.#slider.addEventListener("input", () => this.#readAt(this.#xOf(Number(this.#slider.value))));
    figures += 1;
    this.#panels = [];
    const sync = `figure-${figures}`;
    // The size is known once it stands on the page.
    const observer = new ResizeObserver(() => this.#fit(sync));
    observer.observe(this.#plots);
    this.#undo.push(() => observer.disconnect());
    this.#undo.push(onInkChange(() => this.#panels.forEach((panel) => panel.repaint(inkOf(this.element)))));
    this.#undo.push(
      pinch(this.#plots, {
        zoom: (factor, share) => this.#change((range, all) => {
          const at = range.from + (range.to - range.from) * share;
          const scaledRange = scaled(range, factor, all);
          const middle = scaledRange.from + (scaledRange.to - scaledRange.from) * share;
          return shifted(scaledRange, (at - middle) / (scaledRange.to - scaledRange.from), all);
        }),
        read: (x) => {
          const plot = this.#panels[0]?.plot;
          if (plot) this.#readAt(plot.posToVal(x - plot.over.getBoundingClientRect().left, "x"));
        },
      }),
    );
  }

  get zoomed(): Range | null {
    return this.#zoom;
  }

  /** How many points are worth asking for. */
  get points(): number {
    return Math.min(2000, Math.max(300, Math.round(this.#plots.clientWidth)));
  }

  /** Says that more is being asked for, until the last of those who ask has it. */
  async whileBusy(work: () => Promise<void>): Promise<void> {
    this.#busy += 1;
    attribute(this.element, "aria-busy", "true");
    await work();
    this.#busy -= 1;
    if (this.#busy === 0) attribute(this.element, "aria-busy", null);
  }

  draw(drawing: Drawing): void {
    const fresh = drawing.against !== this.#drawing.against;
    this.#drawing = drawing;
    if (fresh) this.#zoom = null;
    this.#show();
  }

  zoom(range: Range | null): void {
    this.#zoom = range;
    this.#show();
    this.onZoom(range);
  }

  close(): void {
    for (const undo of this.#undo) undo();
    for (const panel of this.#panels) panel.plot.destroy();
  }

  #all(): Range {
    const { traces, behind } = this.#drawing;
    const found = whole([...traces, ...behind]);
    return found === null ? { from: 0, to: 1 } : { from: Math.min(0, found.from), to: found.to };
  }

  #range(): Range {
    return this.#zoom ?? this.#all();
  }

  #change(next: (range: Range, all: Range) => Range): void {
    const all = this.#all();
    const range = next(this.#range(), all);
    this.zoom(range.from <= all.from && range.to >= all.to ? null : range);
  }

  #show(): void {
    const range = this.#range();
    for (const panel of this.#panels) panel.show(this.#drawing, range);
    const against = this.#drawing.against;
    const ends = [range.from, range.to].map((x) => (against === "time" ? duration(x) : ampereHours(x)));
    attribute(this.element, "aria-label", `${this.name} against ${against}, from ${ends[0]} to ${ends[1]}`);
    this.#readAt(this.#xOf(Number(this.#slider.value)), false);
  }

  #xOf(position: number): number {
    const { from, to } = this.#range();
    return from + ((to - from) * position) / POSITIONS;
  }

  /** Reads every trace off at a place of the x axis. */
  #readAt(x: number, moveHairline = true): void {
    const { from, to } = this.#range();
    this.#slider.value = String(Math.round(((x - from) / (to - from)) * POSITIONS));
    const read = this.#drawing.traces.map((trace) => valuesAt(trace, x, this.quantities)).filter((text) => text !== "");
    const against = this.#drawing.against;
    // As fine as the slider's own steps.
    const place = against === "time" ? timeTick(x, (to - from) / POSITIONS) : ampereHours(x);
    write(this.#readOff, read.length === 0 ? "" : `${place}: ${read.join(" · ")}`);
    attribute(this.#slider, "aria-valuetext", this.#readOff.textContent || place);
    const plot = this.#panels[0]?.plot;
    if (moveHairline && plot && read.length > 0) {
      plot.setCursor({ left: plot.valToPos(x, "x"), top: 1 }, false);
      for (const { plot: other } of this.#panels.slice(1)) {
        other.setCursor({ left: other.valToPos(x, "x"), top: 1 }, false);
      }
    }
  }

  #fit(sync: string): void {
    const width = Math.floor(this.#plots.clientWidth);
    if (width < 50) return;
    const isNarrow = width < 500;
    const sameKind = this.#panels[0] !== undefined && (this.#panels[0].plot.width < 500) === isNarrow;
    if (sameKind) {
      for (const { plot } of this.#panels) plot.setSize({ width, height: plot.height });
      return;
    }
    for (const panel of this.#panels.splice(0)) panel.plot.destroy();
    const ink = inkOf(this.element);
    this.quantities.forEach((quantity, index) => {
      const [axis, least] = AXES[quantity];
      const first = index === 0;
      const last = index === this.quantities.length - 1;
      const tall = TALL[quantity] * (isNarrow ? 0.85 : 1);
      const spec: PanelSpec = { quantity, axis, least, first, last, height: Math.round(tall + (last ? 20 : 0)) };
      const on = {
        zoom: (range: Range) => this.zoom(range),
        cursor: (x: number | null) => x !== null && this.#readAt(x, false),
      };
      this.#panels.push(new Panel(spec, this.#plots, width, ink, sync, on));
    });
    this.#show();
  }
}

const TEXT: Record<Quantity, (value: number | null | undefined) => string> = {
  voltage: volts,
  current: amperes,
  temperature: degrees,
};

function valuesAt(trace: Trace, x: number, quantities: readonly Quantity[]): string {
  const index = nearest(trace.x, x);
  if (index < 0) return "";
  const values = quantities.map((quantity) => TEXT[quantity](trace.columns[quantity].mean[index]));
  const charge = trace.charge[index];
  if (charge !== null && charge !== undefined) values.push(ampereHours(charge));
  const name = trace.label === "" ? "" : `${trace.label} `;
  return name + values.join(", ");
}
