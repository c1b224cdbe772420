// Who measures with what: the statement that a certificate's uncertainty begins with.

import { h } from "../dom.ts";
import { Fields, type Wanted } from "./fields.ts";

const STATED = [
  ["rectangular", "as limits (rectangular)"],
  ["normal", "with k = 2 (normal)"],
  ["triangular", "triangular"],
  ["arc_sine", "arc-sine"],
] as const;

const meter = (range: string, resolution: string, optional = false): Wanted[] => [
  { name: "identity", label: "Maker, model, number", first: "", optional },
  { name: "range", label: "Range used", first: range, optional },
  { name: "of_reading", label: "Accuracy: share of the reading", first: "", optional },
  { name: "of_range", label: "plus share of the range", first: "", optional },
  { name: "stated", label: "Stated", first: "rectangular", options: STATED },
  { name: "resolution", label: "Last digit", first: resolution, optional },
];

export interface StatementPart {
  element: HTMLElement;
  body(): unknown;
  /** Whether the voltage is measured, too. */
  readonly withVoltage: boolean;
}

export function statementFields(): StatementPart {
  const who = new Fields("calibration-who", "Who, and where", [
    { name: "operator", label: "Who measures", first: "" },
    { name: "ambient", label: "Ambient temperature", first: "23 degC" },
    { name: "spread", label: "In use warmer or cooler by up to, K", first: "20" },
    { name: "days", label: "Holds for, days", first: "365" },
  ]);
  const current = new Fields("calibration-current", "Current meter", meter("3 A", "100 uA"));
  const voltage = new Fields("calibration-voltage", "Voltage meter (none: leave its maker empty, and the voltage stays nominal)", meter("10 V", "1 mV", true));
  for (const fields of [current, voltage]) {
    fields.element.querySelector("[name=of_reading]")?.setAttribute("placeholder", "0.1 %");
    fields.element.querySelector("[name=of_range]")?.setAttribute("placeholder", "0.02 %");
  }
  const meterOf = (fields: Fields): unknown => {
    const stated = fields.value("stated");
    return {
      ...Object.fromEntries(["identity", "range", "of_reading", "of_range", "resolution"].map((name) => [name, fields.value(name)])),
      stated: stated === "normal" ? { normal: { coverage_factor: 2 } } : stated,
    };
  };
  return {
    element: h("div", {}, who.element, current.element, voltage.element),
    get withVoltage() {
      return voltage.value("identity") !== "";
    },
    body: () => ({
      operator: who.value("operator"),
      ambient: who.value("ambient"),
      temperature_spread_k: Number(who.value("spread")),
      valid_for_days: Number(who.value("days")),
      current_meter: meterOf(current),
      ...(voltage.value("identity") === "" ? {} : { voltage_meter: meterOf(voltage) }),
    }),
  };
}
