// Holding a setpoint from this page: asked for again as long as someone is there, and told how it
// stands. Nothing here turns anything off: when the page is silent, the daemon and the sink do.

import { daemon } from "../api/client.ts";
import type { Run, Sink } from "../api/types.ts";
import { duration } from "../core/format.ts";
import { type Held, Holder } from "../core/holder.ts";
import { h, write } from "../dom.ts";
import { say } from "./announce.ts";

/** So long after the last touch of the page it goes on holding. */
const ATTENDED_MS = 10 * 60_000;
const TOUCHES = ["pointerdown", "keydown", "wheel"] as const;

export interface HoldingPart {
  element: HTMLElement;
  letGo(): void;
}

export function holding(run: Run, sink: Sink): HoldingPart {
  const element = h("p", { class: "course figures" });
  const interval_s = run.by_hand?.interval_s ?? 1;
  // In time-lapse the interval passes as fast as the sink's clock.
  const real_s = interval_s / Math.max(1, sink.link.time_factor ?? 1);
  let before: Held = "held";
  const told = (held: Held, why: string, left_ms: number): string => {
    switch (held) {
      case "held":
        return `Held from this page, ${duration(interval_s)} at a time. Touch the page within ${Math.ceil(left_ms / 60_000)}\u00a0min, or it lets go.`;
      case "unattended":
        return `Nobody has touched the page for ${ATTENDED_MS / 60_000}\u00a0min: it has let go, and the sink goes off by itself.`;
      case "lost":
        return `Not held: ${why}. The sink goes off by itself within ${duration(interval_s)}.`;
      case "let go":
        return "";
    }
  };
  const holder = new Holder({
    renew: () => daemon.renew(run.id),
    interval_ms: real_s * 1000,
    attended_ms: ATTENDED_MS,
    changed: (held, why, left_ms) => {
      const text = told(held, why, left_ms);
      write(element, text);
      if (held !== before && (held === "unattended" || held === "lost")) say(text, true);
      before = held;
    },
  });
  const touch = (): void => holder.touch();
  for (const kind of TOUCHES) document.addEventListener(kind, touch, { passive: true });
  return {
    element,
    letGo() {
      for (const kind of TOUCHES) document.removeEventListener(kind, touch);
      holder.letGo();
    },
  };
}
