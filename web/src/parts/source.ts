// What hangs on a sink that is driven by hand, and within which limits: the same few fields for a
// current held by hand and for a calibration.

import type { Sink } from "../api/types.ts";
import { h } from "../dom.ts";
import { Fields } from "./fields.ts";

const KINDS = [
  ["cell", "a cell"],
  ["pack", "cells in series or parallel"],
  ["supply", "a supply"],
] as const;

export interface SourcePart {
  element: HTMLElement;
  readonly sink: string;
  /** For the request: sink, device under test and interlocks, in the words of a sequence. */
  body(): { sink: string; dut: Record<string, string>; interlocks: Record<string, unknown> };
  update(sinks: readonly Sink[]): void;
}

export function sourceFields(kept: string, first: { kind: string; label: string }): SourcePart {
  const fields = new Fields(kept, "What hangs on it", [
    { name: "sink", label: "Sink", first: "", options: [] },
    { name: "kind", label: "It is", first: first.kind, options: KINDS },
    { name: "label", label: "What is written on it", first: first.label },
    { name: "voltage_min", label: "Least voltage its maker allows", first: "" },
    { name: "voltage_max", label: "Largest voltage", first: "" },
    { name: "current_max", label: "Largest current", first: "" },
    { name: "below", label: "Undervoltage: off below", first: "" },
    { name: "charge", label: "Off after this charge (may be empty)", first: "", optional: true },
  ]);
  for (const [name, example] of [["voltage_min", "2.5 V"], ["voltage_max", "4.2 V"], ["current_max", "2 A"], ["below", "2.75 V"], ["charge", "500 mAh"]] as const) {
    fields.element.querySelector(`[name=${name}]`)?.setAttribute("placeholder", example);
  }
  let known = "";
  return {
    element: h("div", {}, fields.element),
    get sink() {
      return fields.value("sink");
    },
    body() {
      const dut = Object.fromEntries(["kind", "label", "voltage_min", "voltage_max", "current_max"].map((name) => [name, fields.value(name)]));
      const charge = fields.value("charge");
      const interlocks = { undervoltage: { below: fields.value("below"), for: "0 s" }, ...(charge === "" ? {} : { charge }) };
      return { sink: fields.value("sink"), dut, interlocks };
    },
    update(sinks) {
      const names = sinks.map(({ name }) => name);
      if (names.join("\n") === known) return;
      known = names.join("\n");
      fields.offer("sink", names.map((name) => [name, name] as const));
    },
  };
}
