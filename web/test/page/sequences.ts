// Sequences for the tests, from the invented scenario's ready one.

import { sequenceFile } from "./desk.ts";

/** The overnight capacity test of cell K-01. */
export const CAPACITY = sequenceFile("capacity-0.2-it.json");
/** The same with an interlock looser than the bench allows. */
export const LOOSENED = CAPACITY.replace('"above": "800 mA"', '"above": "8 A"');
/** The same with an undervoltage interlock that it must come to. */
export const TRIPPING = CAPACITY.replace('"below": "2.5 V"', '"below": "4.0 V"').replace(
  '"until": [{ "voltage_below": "2.75 V", "for": "400 ms" }],\n      "at_most": "7 h"',
  '"for": "5 h"',
);
/** Twelve hours at 100 readbacks a second. */
export const NIGHT = CAPACITY.replace('"readback": "200 ms"', '"readback": "10 ms"')
  .replace('"over_current": { "above": "800 mA" },\n    "charge": "3.84 Ah"', '"over_current": { "above": "800 mA" }')
  .replace('"over_power": { "above": "3.2 W" },', "")
  .replace('"draw": "0.2 It"', '"draw": "240 mA"')
  .replace('"until": [{ "voltage_below": "2.75 V", "for": "400 ms" }],\n      "at_most": "7 h"', '"for": "680 min"');
/** Ten minutes of discharge: a short record. */
export const SHORT = CAPACITY.replace(
  '"until": [{ "voltage_below": "2.75 V", "for": "400 ms" }],\n      "at_most": "7 h"',
  '"for": "10 min"',
).replace('"rest": "10 min"', '"rest": "30 s"').replace('"rest": "30 min"', '"rest": "30 s"');
