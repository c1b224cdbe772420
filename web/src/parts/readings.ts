// The latest readback of a sink, and what its run has delivered, as a list of quantities.

import type { Run, Sink } from "../api/types.ts";
import type { Bench } from "../core/bench.ts";
import { UNKNOWN, ampereHours, amperes, degrees, volts, wattHours, watts } from "../core/format.ts";
import { type Part, h, write } from "../dom.ts";

const READINGS: readonly [string, (sink: Sink, run: Run | null | undefined) => string][] = [
  ["voltage", (sink) => volts(sink.reading?.voltage_v)],
  ["current", (sink) => amperes(sink.reading?.current_a)],
  ["power", (sink) => watts(sink.reading?.power_w)],
  ["heat sink", temperatureOf],
  ["charge", (_, run) => (run ? ampereHours(run.charge_ah) : UNKNOWN)],
  ["energy", (_, run) => (run ? wattHours(run.energy_wh) : UNKNOWN)],
];

function temperatureOf(sink: Sink): string {
  const fault = sink.reading?.sensor_fault;
  return fault ? `sensor ${fault}` : degrees(sink.reading?.temperature_degc);
}

/** `ended` tells of the run that a sink had last. */
export function readingList(ended: () => Bench["ended"]): Part<Sink> {
  const values = READINGS.map(([name, text]) => ({ name, text, cell: h("dd", { class: "figures" }) }));
  const element = h(
    "dl",
    { class: "readings" },
    ...values.map(({ name, cell }) => h("div", {}, h("dt", {}, name), cell)),
  );
  return {
    element,
    update(sink) {
      for (const { text, cell } of values) write(cell, text(sink, sink.run ?? ended()[sink.name]));
    },
  };
}
