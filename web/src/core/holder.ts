// Asks again and again for what is held, as long as someone is there. Pure but for the timers.
//
// A setpoint held by hand lasts for an interval unless it is asked for again. A page that asked
// for ever would take that protection away: so it asks only while someone has touched it not long
// ago, and then lets go. What it does not do: turn anything off. Silence does.

export type Held = "held" | "unattended" | "lost" | "let go";

/** How often it looks whether it is time. */
const TICK_MS = 250;
/** Questions in an interval: one may be lost, and the next one late. */
const ASKED_TIMES = 4;

export interface Holding {
  /** Asks for it for another interval. */
  renew: () => Promise<unknown>;
  /** How long it lasts in real time if it is not asked for again. */
  interval_ms: number;
  /** How long after the last touch it goes on asking. */
  attended_ms: number;
  /** How it stands is otherwise, or some time has passed; with how long it goes on untouched. */
  changed: (held: Held, why: string, left_ms: number) => void;
}

export class Holder {
  #state: Held = "held";
  #why = "";
  #touched = Date.now();
  #asked = 0;
  #asking = false;
  readonly #timer: ReturnType<typeof setInterval>;

  constructor(private readonly holding: Holding) {
    this.#timer = setInterval(() => void this.#tick(), TICK_MS);
    void this.#tick();
  }

  /** Someone is there. */
  touch(): void {
    this.#touched = Date.now();
  }

  /** How long it goes on without a touch. */
  get left_ms(): number {
    return Math.max(0, this.#touched + this.holding.attended_ms - Date.now());
  }

  letGo(): void {
    clearInterval(this.#timer);
    this.#turn("let go");
  }

  async #tick(): Promise<void> {
    if (this.#state === "let go") return;
    if (this.left_ms === 0) return this.#turn("unattended");
    this.#turn(this.#state === "unattended" ? "held" : this.#state, this.#why);
    const now = Date.now();
    if (this.#asking || now - this.#asked < this.holding.interval_ms / ASKED_TIMES) return;
    this.#asked = now;
    this.#asking = true;
    try {
      await this.holding.renew();
      if (this.#state === "lost") this.#turn("held");
    } catch (error) {
      if (this.#state === "held") this.#turn("lost", error instanceof Error ? error.message : String(error));
    }
    this.#asking = false;
  }

  #turn(state: Held, why = ""): void {
    if (this.#state === "let go" && state !== "let go") return;
    this.#state = state;
    this.#why = why;
    this.holding.changed(state, why, this.left_ms);
  }
}
