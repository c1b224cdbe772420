// What the daemon says over HTTP, as far as the page reads it. The full description is the
// daemon's own, at /v1/openapi.json; names carry their units.

export type LinkState = "lost" | "greeting" | "connected" | "refused";

export interface Link {
  kind: "serial" | "tcp" | "simulated";
  port: string;
  state: LinkState;
  reason: string | null;
  time_factor: number | null;
}

export interface Reading {
  at: string;
  voltage_v: number;
  voltage_min_v: number;
  voltage_max_v: number;
  current_a: number;
  current_min_a: number;
  current_max_a: number;
  power_w: number;
  temperature_degc: number | null;
  sensor_fault: string | null;
  state: "off" | "on" | "saturated" | "latched";
  latched_by: string | null;
}

export interface Margin {
  interlock: string;
  unit: string;
  value: number;
  worst_value: number;
  threshold: number;
  nearness: number;
  worst_nearness: number;
}

export interface Crossing {
  interlock: string;
  unit: string;
  value: number;
  threshold: number;
  by_sink: boolean;
}

export type EndingWord = "finished" | "stopped" | "tripped" | "interrupted";

export interface Ending {
  how: EndingWord;
  interlock: string | null;
  at: string;
  reason: string | null;
}

export interface Step {
  op: number;
  label: string | null;
  since_s: number;
  charge_ah: number | null;
}

export interface Round {
  label: string | null;
  round: number;
  times: number | null;
}

export type RunState = "starting" | "running" | "held" | "interrupted" | "ending" | "ended";
export type Clock = "real" | "time_lapse" | "virtual";

export interface Run {
  id: string;
  sink: string;
  dut: string;
  title: string;
  state: RunState;
  clock: Clock;
  started: string;
  elapsed_s: number;
  expected_s: number;
  left_at_most_s: number | null;
  step: Step | null;
  repeats: Round[];
  setpoint_a: number | null;
  charge_ah: number;
  energy_wh: number;
  reading: Reading | null;
  margins: Margin[];
  crossings: Crossing[];
  /** What was asked for last, of a run by hand. */
  by_hand: { setpoint_a: number; interval_s: number } | null;
  ending: Ending | null;
  record: string;
  sealed: boolean;
}

export interface Sink {
  name: string;
  at: string;
  link: Link;
  limits: { current_a: number; power_w: number; voltage_v: number; temperature_degc: number };
  calibrated: boolean;
  reading: Reading | null;
  latched_by: string | null;
  run: Run | null;
}

export interface SinkList {
  bench: string;
  sinks: Sink[];
}

export interface RunEvent {
  run: string;
  sink: string;
  dut: string;
  at: string;
  message: string;
  calls_for_person: boolean;
  news: string | Record<string, unknown>;
}

export interface LinkEvent {
  sink: string;
  at: string;
  state: LinkState;
  reason: string | null;
}

export interface Off {
  sink: string;
  acknowledged: boolean;
  took_s: number;
  detail: string | null;
}

export interface Place {
  line: number;
  column: number;
  excerpt: string;
  caret: number;
  width: number;
}

export interface Finding {
  severity: "error" | "warning";
  rule: string;
  message: string;
  hint: string;
  pointer: string;
  place?: Place;
}

export interface Problem {
  title: string;
  status: number;
  detail: string;
  code: string;
  findings?: Finding[];
}

export interface Outline {
  time_s: number[];
  current_a: number[];
  bands: [number, number, number, number][];
}

export interface Check {
  findings: Finding[];
  title: string;
  sink: string;
  dut: string;
  labels: string[];
  duration_at_most_s: number;
  readbacks_at_most: number;
  forecast: { duration_s: number; charge_ah: number; energy_wh: number };
  outline: Outline;
}

/** Thinned readbacks, one array a column; the same index belongs to the same stretch of time. */
export interface Curve {
  time_s: number[];
  readbacks: number[];
  charge_ah: (number | null)[];
  current_a: number[];
  current_min_a: number[];
  current_max_a: number[];
  voltage_v: number[];
  voltage_min_v: number[];
  voltage_max_v: number[];
  temperature_degc: (number | null)[];
  temperature_max_degc: (number | null)[];
}

export interface Rehearsal {
  check: Check;
  ending: Ending;
  duration_s: number;
  charge_ah: number;
  energy_wh: number;
  peak_temperature_degc: number | null;
  margins: Margin[];
  readbacks: number;
  curve: Curve;
  took_s: number;
}

export interface Readings {
  id: string;
  in_progress: boolean;
  length_s: number;
  curve: Curve;
}

/** A stretch of a run under one label. */
export interface Stretch {
  from_s: number;
  to_s: number;
  label: string | null;
  steps: number;
}

export interface Happening {
  at_s: number;
  kind: string;
  message: string;
}

export interface Course {
  stretches: Stretch[];
  happenings: Happening[];
  left_out: number;
}

export interface RecordSummary {
  id: string;
  folder: string;
  sink: string;
  dut: string;
  title: string;
  started: string;
  clock: Clock;
  labels: string[];
  ending: Ending | null;
  sealed: boolean;
  resumed: string[];
}

export interface RecordList {
  records: RecordSummary[];
  unreadable: { folder: string; reason: string }[];
}

export interface RecordOne {
  summary: RecordSummary;
  manifest: { sequence: { text: string; files: Record<string, string> }; [key: string]: unknown };
}

export interface Figure {
  name: string;
  label: string | null;
  occurrence?: number | null;
  value: number;
  unit: string;
  expanded: { half_width: number; coverage_factor: number; probability: number } | null;
  method: { how: string; source: string };
}

/** One figure in one group of records. */
export interface Group {
  name: string;
  /** The records and their values. */
  values: [string, number][];
  mean: number;
  standard_deviation: number | null;
  interval: [number, number] | null;
  /** Standard uncertainty of measuring one value. */
  measurement: number | null;
  outliers: string[];
  notes: string[];
}

/** The mean of the group `of` less that of the group `from`. */
export interface Difference {
  from: string;
  of: string;
  difference: number;
  standard_error: number;
  degrees_of_freedom: number;
  interval: [number, number];
  /** How probable so large a difference is if there is none. */
  probability: number;
  measurement: number | null;
}

export interface Compared {
  name: string;
  label: string | null;
  unit: string;
  groups: Group[];
  differences: Difference[];
}

export interface Comparison {
  comparison: { figures: Compared[]; probability: number; methods: string[] };
  peukert: {
    group: string;
    law: {
      exponent: { value: number; standard_uncertainty: number };
      capacity_at_one_ampere_ah: number;
      discharges: [number, number][];
    };
  }[];
}

/** A calibration, or the verification of a certificate, under way. */
export interface Calibration {
  id: string;
  sink: string;
  certificate: string;
  verifies: boolean;
  state: "settling" | "settled" | "taken" | "ended" | "finished";
  waits_for: string | null;
  /** Which point is held, from 1. */
  point: number;
  points: number;
  setpoint_a: number | null;
  nominal: {
    readbacks: number;
    current_a: number;
    current_deviation_a: number;
    voltage_v: number;
    voltage_deviation_v: number;
    temperature_degc: number | null;
  } | null;
  current_points: number;
  voltage_points: number;
  run: Run | null;
}

/** One channel's line of a certificate. */
export interface CertificateLine {
  channel: string;
  unit: string;
  offset: number;
  offset_uncertainty: number;
  slope: number;
  slope_uncertainty: number;
  points: number;
  largest_residual: number;
  outliers: number[];
  range: [number, number];
  bent: boolean;
}

export interface Verification {
  certificate: string;
  at: string;
  operator: string;
  record: string | null;
  passed: boolean;
  points: {
    channel: string;
    unit: string;
    nominal: number;
    corrected: number;
    reference: number;
    error: number;
    expanded: number;
    reference_expanded: number;
    normalised_error: number;
    passed: boolean;
  }[];
}

export interface Certificate {
  identity: string;
  sink: string;
  operator: string;
  issued: string;
  valid_until: string;
  validity: "valid" | "expired" | "not_yet";
  meters: string[];
  record: string | null;
  lines: CertificateLine[];
  drift: { channel: string; at_micro: number; change_micro: number; expanded_micro: number; normalised_change: number; significant: boolean }[];
  verifications: Verification[];
}

export interface CertificateList {
  certificates: Certificate[];
  troubles: string[];
}

export interface CalibrationOutcome {
  id: string;
  file: string;
  bench_entry: string | null;
  certificate: Certificate | null;
  verification: Verification | null;
}
