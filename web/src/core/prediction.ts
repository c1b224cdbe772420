// What was rehearsed before a run was started, by the run: the prediction to draw behind it.
// Kept for this tab and for the last few runs only.

import type { Curve } from "../api/types.ts";

const MOST = 8;
const kept = new Map<string, Curve>();

export function keepPrediction(run: string, curve: Curve): void {
  kept.delete(run);
  kept.set(run, curve);
  const oldest = kept.keys().next().value;
  if (kept.size > MOST && oldest !== undefined) kept.delete(oldest);
}

export const predictionOf = (run: string): Curve | null => kept.get(run) ?? null;
