// A sequence's planned shape: current against time, as the check has it. Edges are edges; what
// is repeated too often to draw out is a shaded stretch.

import type { Outline } from "../api/types.ts";
import { duration } from "../core/format.ts";
import { attribute, h } from "../dom.ts";
import { inkOf, onInkChange } from "./ink.ts";
import { Panel } from "./panel.ts";

const HEIGHT = 200;

export class Shape {
  readonly element = h("div", { class: "figure plots", role: "img" });
  #panel: Panel | null = null;
  #outline: Outline | null = null;
  readonly #undo: (() => void)[] = [];

  constructor() {
    const observer = new ResizeObserver(() => this.#fit());
    observer.observe(this.element);
    this.#undo.push(() => observer.disconnect());
    this.#undo.push(onInkChange(() => this.#panel?.repaint(inkOf(this.element))));
  }

  draw(outline: Outline): void {
    this.#outline = outline;
    this.#show();
  }

  close(): void {
    for (const undo of this.#undo) undo();
    this.#panel?.plot.destroy();
  }

  #show(): void {
    const { time_s, current_a, bands } = this.#outline ?? { time_s: [], current_a: [], bands: [] };
    if (!this.#panel || time_s.length === 0) return;
    const to = Math.max(time_s.at(-1) ?? 1, ...bands.map((band) => band[1]));
    const peak = Math.max(0, ...current_a, ...bands.map((band) => band[3]));
    const line = { mean: current_a, min: current_a, max: current_a };
    const shaded = bandsOf(bands);
    const empty = { mean: [], min: [], max: [] };
    this.#panel.show(
      {
        against: "time",
        traces: [
          { label: "", x: time_s, time: time_s, charge: [], columns: { current: line, voltage: empty, temperature: empty } },
          { label: "", x: shaded.x, time: shaded.x, charge: [], columns: { current: shaded, voltage: empty, temperature: empty } },
        ],
        shaded: true,
        behind: [],
        labels: [],
        marks: [],
      },
      { from: 0, to },
    );
    attribute(
      this.element,
      "aria-label",
      `Planned current against time: up to ${peak.toFixed(3)} A over ${duration(to)}`,
    );
  }

  #fit(): void {
    const width = Math.floor(this.element.clientWidth);
    if (width < 50) return;
    if (this.#panel) {
      this.#panel.plot.setSize({ width, height: HEIGHT });
      return;
    }
    this.#panel = new Panel(
      { quantity: "current", axis: "planned current / A", height: HEIGHT, least: 0.004, first: false, last: true },
      this.element,
      width,
      inkOf(this.element),
      "shape",
      { zoom: () => undefined, cursor: () => undefined },
    );
    this.#show();
  }
}

/** Repeats as an outline of their least and largest current. */
function bandsOf(bands: Outline["bands"]): { x: number[]; mean: (number | null)[]; min: number[]; max: number[] } {
  const x: number[] = [];
  const [min, max]: [number[], number[]] = [[], []];
  const mean: (number | null)[] = [];
  for (const [from, to, least, largest] of bands) {
    x.push(from, to);
    min.push(least, least);
    max.push(largest, largest);
    mean.push(null, null);
  }
  return { x, mean, min, max };
}
