// Which record is in which group: by a rule, or as someone writes it beside the record.

import type { RecordSummary } from "../api/types.ts";
import { clockNote, moment } from "../core/format.ts";
import { type GroupBy, groupNameOf, grouped } from "../core/groups.ts";
import { type Grouped, link } from "../core/route.ts";
import { h } from "../dom.ts";
import { choice } from "./choice.ts";

const RULES: readonly [GroupBy, string][] = [
  ["kind", "kind of device"],
  ["device", "device"],
  ["sequence", "sequence"],
];

export interface Groups {
  element: HTMLElement;
  /** As they stand. */
  now(): Grouped[];
}

/** `given` are the groups of the address, `names` what each record is called. */
export function groupsOf(
  records: readonly RecordSummary[],
  names: readonly string[],
  given: readonly Grouped[],
  changed: () => void,
): Groups {
  const named = (id: string): string => given.find(({ ids }) => ids.includes(id))?.name ?? "";
  const fields = records.map((record, index) => {
    const field = h("input", {
      value: named(record.id) || groupNameOf(record, "kind"),
      "aria-label": `Group of ${names[index] ?? record.dut}`,
      list: "groups",
      autocomplete: "off",
      spellcheck: "false",
      maxlength: 60,
      onchange: () => {
        if (field.value.trim() === "") field.value = groupNameOf(record, "kind");
        offer();
        changed();
      },
    });
    return { record, field };
  });
  const known = h("datalist", { id: "groups" });
  const offer = (): void => known.replaceChildren(...[...new Set(fields.map(({ field }) => field.value))].map((value) => h("option", { value })));
  offer();
  const element = h(
    "section",
    { "aria-labelledby": "groups-title" },
    h("h3", { id: "groups-title" }, "Groups"),
    h("div", { class: "controls" }, choice<GroupBy>("Group by", RULES, given.some(({ name }) => name !== "") ? null : "kind", (rule) => {
      for (const { record, field } of fields) field.value = groupNameOf(record, rule);
      offer();
      changed();
    })),
    h(
      "ul",
      { class: "compared" },
      ...fields.map(({ record, field }, index) => {
        const note = clockNote(record.clock);
        return h(
          "li",
          {},
          field,
          h(
            "span",
            {},
            h("a", { href: link({ view: "record", id: record.id }) }, names[index] ?? record.dut),
            ` ${record.title}, ${record.sink}, ${moment(new Date(record.started))}${note ? ` (${note})` : ""}`,
          ),
        );
      }),
    ),
    known,
  );
  return { element, now: () => grouped(fields.map(({ record, field }) => [record.id, field.value.trim()] as const)) };
}
