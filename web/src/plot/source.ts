// The readbacks of one record: all of it in few points, and the stretch that is looked at in
// more. One question at a time is asked: of those that come meanwhile, as while two fingers move,
// only the latest. An answer is taken even if a later question waits: it is nearer than nothing.

import { daemon } from "../api/client.ts";
import type { Curve, Readings } from "../api/types.ts";
import { type Range, spliced } from "../core/curve.ts";
import { isAbort } from "../dom.ts";
import { LatestFirst } from "../core/turns.ts";

export class Source {
  #overview: Readings | null = null;
  #detail: Curve | null = null;
  readonly #turns = new LatestFirst();
  readonly #closing = new AbortController();

  constructor(readonly id: string) {}

  get curve(): Curve | null {
    if (this.#overview === null) return null;
    return this.#detail === null ? this.#overview.curve : spliced(this.#overview.curve, this.#detail);
  }

  get inProgress(): boolean {
    return this.#overview?.in_progress ?? false;
  }

  /** All of it, over which what is known in detail stays; true if there is something new. */
  async whole(points: number): Promise<boolean> {
    const found = await this.#ask({ points });
    if (found === null) return false;
    this.#overview = found;
    return true;
  }

  /** A stretch of time in detail, over what is known of the whole; true if it is new. */
  async stretch(time: Range, points: number): Promise<boolean> {
    const found = await this.#ask({ from_s: Math.max(0, time.from), to_s: time.to, points });
    if (found === null) return false;
    this.#detail = found.curve;
    return true;
  }

  /** No stretch of it is looked at any more. */
  forget(): void {
    this.#detail = null;
  }

  close(): void {
    this.#closing.abort();
  }

  async #ask(stretch: { from_s?: number; to_s?: number; points: number }): Promise<Readings | null> {
    const { signal } = this.#closing;
    try {
      return await this.#turns.take(() => daemon.readings(this.id, stretch, signal));
    } catch (error) {
      if (isAbort(error)) return null;
      throw error;
    }
  }
}
