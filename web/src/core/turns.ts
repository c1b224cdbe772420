// Questions that supersede each other: one at a time, and of those that wait only the latest.

export class LatestFirst {
  #latest = 0;
  #underWay: Promise<unknown> = Promise.resolve();

  /** The answer, or null where a later question came before this one was asked. */
  async take<T>(ask: () => Promise<T>): Promise<T | null> {
    this.#latest += 1;
    const mine = this.#latest;
    await this.#underWay;
    if (mine !== this.#latest) return null;
    const answer = ask();
    // Whoever waits is not to fail with it.
    this.#underWay = answer.catch(() => undefined);
    return answer;
  }
}
