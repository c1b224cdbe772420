// One of a few: radio buttons in a line.

import { h } from "../dom.ts";

let choices = 0;

export function choice<T extends string>(
  name: string,
  options: readonly [T, string][],
  first: T | null,
  chosen: (value: T) => void,
): HTMLElement {
  choices += 1;
  const group = `choice-${choices}`;
  return h(
    "fieldset",
    { class: "choice" },
    h("legend", {}, name),
    ...options.map(([value, text]) =>
      h(
        "label",
        {},
        h("input", { type: "radio", name: group, value, checked: value === first, onchange: () => chosen(value) }),
        text,
      ),
    ),
  );
}
