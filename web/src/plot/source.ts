// The readbacks of one record: all of it in few points, and the stretch that is looked at in
// more. The latest question wins; an older one is given up.

import { daemon } from "../api/client.ts";
import type { Curve, Readings } from "../api/types.ts";
import { type Range, spliced } from "../core/curve.ts";
import { isAbort } from "../dom.ts";

export class Source {
  #overview: Readings | null = null;
  #detail: Curve | null = null;
  #asking: AbortController | null = null;

  constructor(readonly id: string) {}

  get curve(): Curve | null {
    if (this.#overview === null) return null;
    return this.#detail === null ? this.#overview.curve : spliced(this.#overview.curve, this.#detail);
  }

  get inProgress(): boolean {
    return this.#overview?.in_progress ?? false;
  }

  /** All of it; true if there is something new to draw. */
  async whole(points: number): Promise<boolean> {
    const found = await this.#ask({ points });
    if (found === null) return false;
    this.#overview = found;
    this.#detail = null;
    return true;
  }

  /** A stretch of time in detail, over what is known of the whole. */
  async stretch(time: Range, points: number): Promise<boolean> {
    const found = await this.#ask({ from_s: Math.max(0, time.from), to_s: time.to, points });
    if (found === null) return false;
    this.#detail = found.curve;
    return true;
  }

  close(): void {
    this.#asking?.abort();
  }

  async #ask(stretch: { from_s?: number; to_s?: number; points: number }): Promise<Readings | null> {
    this.#asking?.abort();
    const asking = new AbortController();
    this.#asking = asking;
    try {
      return await daemon.readings(this.id, stretch, asking.signal);
    } catch (error) {
      if (isAbort(error)) return null;
      throw error;
    }
  }
}
