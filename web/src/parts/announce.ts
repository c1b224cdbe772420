// What is said aloud: a trip or a lost link at once, everything else when there is a pause.

import { h } from "../dom.ts";
import type { Said } from "../core/bench.ts";

/** What came shortly before stays, so that nothing is cut off by what follows at once. */
const KEPT = 12;

const polite = h("p", { class: "unseen", role: "status", "aria-live": "polite" });
const urgent = h("p", { class: "unseen", role: "alert", "aria-live": "assertive" });

export const regions: readonly HTMLElement[] = [polite, urgent];

export function announce(said: readonly Said[]): void {
  for (const region of [polite, urgent]) {
    const texts = said.filter((one) => one.urgent === (region === urgent)).map((one) => one.text);
    for (const text of texts) region.append(h("span", {}, `${text} `));
    while (region.childElementCount > KEPT) region.firstElementChild?.remove();
  }
}

export const say = (text: string, isUrgent = false): void => announce([{ text, urgent: isUrgent }]);
