// The daemon's events, without a gap: after a drop the stream is taken up behind the last event
// that was heard. A page that nobody looks at lets go of the stream (a browser opens few
// connections to one host, and `off` in another tab must find one free) and takes it up again,
// without a gap, when it is looked at.

import { Parser, type Message } from "../core/sse.ts";
import { authorized, renewToken } from "./client.ts";

/** The daemon says something every 15 s at least; after this much silence the link is dead. */
const SILENCE_MS = 35_000;
const FIRST_WAIT_MS = 500;
const LONGEST_WAIT_MS = 5_000;
/** How long a page may be out of sight before it lets go. */
const HIDDEN_MS = 60_000;

export interface Listener {
  /** The stream stands. `resumed` says that it goes on behind the last event. */
  open(resumed: boolean): void;
  message(message: Message): void;
  lost(): void;
}

export function follow(listener: Listener): void {
  void new Follower(listener).run();
}

class Follower {
  #last = "";
  #wait = FIRST_WAIT_MS;

  constructor(private readonly listener: Listener) {}

  async run(): Promise<never> {
    for (;;) {
      await looked();
      const letGo = new AbortController();
      const stop = abortWhenHidden(letGo);
      const offline = (): void => letGo.abort("offline");
      window.addEventListener("offline", offline);
      try {
        await this.#follow(letGo);
      } catch {
        // Whatever it was: the stream has ended.
      }
      stop();
      window.removeEventListener("offline", offline);
      if (letGo.signal.reason === "hidden") continue;
      this.listener.lost();
      await pause(this.#wait);
      this.#wait = Math.min(this.#wait * 2, LONGEST_WAIT_MS);
    }
  }

  async #follow(letGo: AbortController): Promise<void> {
    const headers = authorized({ Accept: "text/event-stream" });
    const resumed = this.#last !== "";
    if (resumed) headers["Last-Event-ID"] = this.#last;
    const answer = await fetch("/v1/events", { headers, signal: letGo.signal, cache: "no-store" });
    if (answer.status === 401) await renewToken();
    if (!answer.ok || answer.body === null) return;
    this.listener.open(resumed);
    this.#wait = FIRST_WAIT_MS;
    const parser = new Parser();
    const reader = answer.body.pipeThrough(new TextDecoderStream()).getReader();
    for (;;) {
      const timer = setTimeout(() => letGo.abort("silent"), SILENCE_MS);
      const { done, value } = await reader.read().finally(() => clearTimeout(timer));
      if (done) return;
      for (const message of parser.take(value)) {
        this.#last = message.id || this.#last;
        this.listener.message(message);
      }
    }
  }
}

const pause = (ms: number): Promise<void> => new Promise((resolve) => setTimeout(resolve, ms));

/** Waits until someone looks. */
async function looked(): Promise<void> {
  if (document.visibilityState === "visible") return;
  await new Promise<void>((resolve) => {
    const seen = (): void => {
      if (document.visibilityState !== "visible") return;
      document.removeEventListener("visibilitychange", seen);
      resolve();
    };
    document.addEventListener("visibilitychange", seen);
  });
}

function abortWhenHidden(letGo: AbortController): () => void {
  let timer = 0;
  const changed = (): void => {
    window.clearTimeout(timer);
    if (document.visibilityState === "hidden") {
      timer = window.setTimeout(() => letGo.abort("hidden"), HIDDEN_MS);
    }
  };
  document.addEventListener("visibilitychange", changed);
  return () => {
    window.clearTimeout(timer);
    document.removeEventListener("visibilitychange", changed);
  };
}
