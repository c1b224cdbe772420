// Asking the daemon. Whatever is slow (readbacks, rehearsals) takes turns over two connections,
// so that of the few a browser opens to one host some are always free: `off` waits for nothing.

import type {
  Calibration,
  CalibrationOutcome,
  CertificateList,
  Check,
  Comparison,
  Course,
  Figure,
  Off,
  Problem,
  Readings,
  RecordList,
  RecordOne,
  Rehearsal,
  Run,
  SinkList,
} from "./types.ts";

/** Slow requests at once. */
const SLOW_MAX = 2;
const TOKEN = "token";

/** An answer of the daemon that is a refusal. */
export class Refused extends Error {
  constructor(readonly problem: Problem) {
    super(problem.detail || problem.title);
  }
}

/** No answer at all. */
export class Unreachable extends Error {}

let askForToken: (() => Promise<string | null>) | null = null;
let tokenAsked: Promise<string | null> | null = null;

/** Who asks the person for a token, where the daemon wants one. */
export function onTokenNeeded(ask: () => Promise<string | null>): void {
  askForToken = ask;
}

export const token = (): string | null => sessionStorage.getItem(TOKEN);

/** Asks once, however many requests want it; true if there is another token to try. */
export async function renewToken(): Promise<boolean> {
  tokenAsked ??= (askForToken?.() ?? Promise.resolve(null)).finally(() => {
    tokenAsked = null;
  });
  const given = (await tokenAsked)?.trim();
  if (!given) return false;
  sessionStorage.setItem(TOKEN, given);
  return true;
}

export function authorized(headers: Record<string, string> = {}): Record<string, string> {
  const held = token();
  return held === null ? headers : { ...headers, Authorization: `Bearer ${held}` };
}

interface Options {
  body?: unknown;
  headers?: Record<string, string>;
  signal?: AbortSignal;
}

async function ask<T>(method: string, path: string, options: Options = {}): Promise<T> {
  const headers = authorized(options.headers);
  const init: RequestInit = { method, headers, cache: "no-store" };
  if (options.body !== undefined) {
    headers["Content-Type"] = "application/json";
    init.body = JSON.stringify(options.body);
  }
  if (options.signal) init.signal = options.signal;
  let answer: Response;
  try {
    answer = await fetch(path, init);
  } catch (error) {
    if (options.signal?.aborted) throw error;
    throw new Unreachable("the daemon does not answer");
  }
  if (answer.status === 401 && (await renewToken())) return ask(method, path, options);
  if (answer.ok) return (await answer.json()) as T;
  throw new Refused(await problemOf(answer));
}

async function problemOf(answer: Response): Promise<Problem> {
  try {
    return (await answer.json()) as Problem;
  } catch {
    const detail = `the daemon answers ${answer.status} ${answer.statusText}`;
    return { title: detail, detail, status: answer.status, code: "" };
  }
}

let free = SLOW_MAX;
const waiting: (() => void)[] = [];

/** Lets slow requests take turns. */
async function inTurn<T>(work: () => Promise<T>): Promise<T> {
  if (free > 0) free -= 1;
  else await new Promise<void>((resolve) => waiting.push(resolve));
  try {
    return await work();
  } finally {
    const next = waiting.shift();
    if (next) next();
    else free += 1;
  }
}

/** A key for one intended start, 128 random bits: `crypto.randomUUID` is not there on a page
 * without TLS. */
export function newKey(): string {
  const bytes = crypto.getRandomValues(new Uint8Array(16));
  return Array.from(bytes, (byte) => byte.toString(16).padStart(2, "0")).join("");
}

/** What a sequence is asked about. */
export interface SequenceRequest {
  sequence: string;
  files: Record<string, string>;
  sink: string;
  dut?: string;
}

/** Which readbacks: a stretch of a run in seconds since its start, in so many points. */
export interface Stretch {
  from_s?: number;
  to_s?: number;
  points: number;
}

const at = (id: string, what: string): string => `/v1/records/${encodeURIComponent(id)}${what}`;
const runAt = (id: string, what: string): string => `/v1/runs/${encodeURIComponent(id)}${what}`;
const calibrationAt = (id: string, what: string): string => `/v1/calibrations/${encodeURIComponent(id)}${what}`;
const sinkAt = (name: string, what: string): string => `/v1/sinks/${encodeURIComponent(name)}${what}`;

export const daemon = {
  sinks: (): Promise<SinkList> => ask("GET", "/v1/sinks"),
  runs: async (): Promise<Run[]> => (await ask<{ runs: Run[] }>("GET", "/v1/runs")).runs,
  run: (id: string): Promise<Run> => ask("GET", runAt(id, "")),

  /** One request without a body; `keepalive` lets it through even as the page is left. */
  off: async (sink: string | null): Promise<Off[]> => {
    const path = sink === null ? "/v1/off" : sinkAt(sink, "/off");
    const init: RequestInit = { method: "POST", headers: authorized(), keepalive: true, priority: "high" };
    let answer: Response;
    try {
      answer = await fetch(path, init);
    } catch {
      throw new Unreachable("the daemon does not answer");
    }
    if (answer.status === 401 && (await renewToken())) return daemon.off(sink);
    if (!answer.ok) throw new Refused(await problemOf(answer));
    const off = (await answer.json()) as Off | { sinks: Off[] };
    return "sinks" in off ? off.sinks : [off];
  },
  reset: (sink: string): Promise<unknown> => ask("POST", sinkAt(sink, "/reset")),
  command: (id: string, what: "stop" | "hold" | "continue"): Promise<Run> =>
    ask("POST", runAt(id, `/${what}`)),

  check: (body: SequenceRequest, signal: AbortSignal): Promise<Check> =>
    ask("POST", "/v1/sequences/check", { body, signal }),
  rehearse: (body: SequenceRequest & { source?: unknown; points: number }): Promise<Rehearsal> =>
    inTurn(() => ask("POST", "/v1/sequences/rehearse", { body })),
  start: (body: SequenceRequest, key: string): Promise<Run> =>
    ask("POST", "/v1/runs", { body, headers: { "Idempotency-Key": key } }),

  beginByHand: (body: unknown, key: string): Promise<Run> =>
    ask("POST", "/v1/runs/by-hand", { body, headers: { "Idempotency-Key": key } }),
  setpoint: (id: string, setpoint: string): Promise<Run> =>
    ask("POST", runAt(id, "/setpoint"), { body: { setpoint } }),
  /** Holds what is set for another interval. */
  renew: (id: string): Promise<Run> => ask("POST", runAt(id, "/renew")),
  beginCalibration: (body: unknown, key: string): Promise<Calibration> =>
    ask("POST", "/v1/calibrations", { body, headers: { "Idempotency-Key": key } }),
  calibration: (id: string): Promise<Calibration> => ask("GET", calibrationAt(id, "")),
  meterReading: (id: string, body: { current?: string; voltage?: string }): Promise<Calibration> =>
    ask("POST", calibrationAt(id, "/reading"), { body }),
  finishCalibration: (id: string): Promise<CalibrationOutcome> => ask("POST", calibrationAt(id, "/finish")),
  certificates: (): Promise<CertificateList> => ask("GET", "/v1/certificates"),

  records: (): Promise<RecordList> => inTurn(() => ask("GET", "/v1/records")),
  record: (id: string): Promise<RecordOne> => inTurn(() => ask("GET", at(id, ""))),
  course: (id: string): Promise<Course> => inTurn(() => ask("GET", at(id, "/course"))),
  figures: async (id: string): Promise<{ figures: Figure[]; warnings: string[] }> => {
    const answer = await inTurn(() =>
      ask<{ figures: { figures: Figure[]; warnings: string[] } }>("GET", at(id, "/figures")),
    );
    return answer.figures;
  },
  comparison: (groups: readonly { name: string; ids: readonly string[] }[]): Promise<Comparison> => {
    // What parts groups and records in the question cannot be in a name.
    const text = groups.map(({ name, ids }) => `${name.replaceAll(/[:;,]/g, " ")}:${ids.join(",")}`).join(";");
    return inTurn(() => ask("GET", `/v1/comparison?${new URLSearchParams({ groups: text }).toString()}`));
  },
  readings: (id: string, stretch: Stretch, signal: AbortSignal): Promise<Readings> => {
    const query = new URLSearchParams({ points: String(stretch.points) });
    if (stretch.from_s !== undefined) query.set("from_s", stretch.from_s.toFixed(6));
    if (stretch.to_s !== undefined) query.set("to_s", stretch.to_s.toFixed(6));
    return inTurn(() => ask("GET", at(id, `/readings?${query.toString()}`), { signal }));
  },
  /** Where the report of a record is. */
  reportPath: (id: string): string => at(id, "/report"),
};
