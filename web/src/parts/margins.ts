// How near each armed interlock is: a thin bar for now, a notch for the worst so far, the limit
// at the right end; the nearest first. The numbers stand beside it.

import type { Margin } from "../api/types.ts";
import { percent, standing, words } from "../core/format.ts";
import { List, type Part, attribute, h, show, write } from "../dom.ts";

/** Margins that are always seen; the others are folded away, with how near the nearest is. */
const SHOWN = 5;

export function margins(): Part<readonly Margin[]> {
  const near = h("ol", { class: "margins" });
  const far = h("ol", { class: "margins" });
  const summary = h("summary");
  const folded = h("details", { class: "farther", hidden: true }, summary, far);
  const nearest = new List<Margin>(near, (margin) => margin.interlock, one);
  const others = new List<Margin>(far, (margin) => margin.interlock, one);
  return {
    element: h("div", {}, near, folded),
    update(all) {
      nearest.update(all.slice(0, SHOWN));
      const rest = all.slice(SHOWN);
      others.update(rest);
      show(folded, rest.length > 0);
      const most = Math.max(0, ...rest.map((margin) => margin.worst_nearness));
      write(summary, `${rest.length} farther away: at most ${percent(most)} so far`);
    },
  };
}

function one(first: Margin): Part<Margin> {
  const name = words(first.interlock);
  const now = h("div", { class: "bar-now" });
  const worst = h("div", { class: "bar-worst" });
  const bar = h(
    "div",
    { class: "bar", role: "meter", "aria-label": name, "aria-valuemin": 0, "aria-valuemax": 100 },
    now,
    worst,
  );
  const [values, share] = [h("span", { class: "margin-values figures" }), h("span")];
  const element = h(
    "li",
    {},
    h("span", { class: "margin-name" }, name),
    bar,
    h("span", { class: "margin-share figures" }, share),
    values,
  );
  return {
    element,
    update(margin) {
      now.style.width = place(margin.nearness);
      worst.style.left = place(margin.worst_nearness);
      const text = standing(margin);
      write(values, text);
      write(share, percent(Math.max(0, margin.nearness)));
      attribute(element, "data-near", margin.nearness >= 0.9);
      attribute(bar, "aria-valuenow", Math.round(Math.min(1, Math.max(0, margin.nearness)) * 100));
      attribute(bar, "aria-valuetext", `${percent(margin.nearness)} of the way: ${text}`);
    },
  };
}

const place = (share: number): string => `${Math.min(1, Math.max(0, share)) * 100}%`;
