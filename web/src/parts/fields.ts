// What is filled in by hand: labelled fields that a tab remembers, and why an answer was refused.

import { Refused } from "../api/client.ts";
import { h, reasonOf } from "../dom.ts";

export interface Wanted {
  name: string;
  label: string;
  /** What stands there at first. */
  first: string;
  /** A choice instead of a text. */
  options?: readonly (readonly [string, string])[];
  /** May stay empty. */
  optional?: boolean;
}

type Field = HTMLInputElement | HTMLSelectElement;

/** A group of fields; what was written stays in this tab under a name. */
export class Fields {
  readonly element: HTMLFieldSetElement;
  readonly #fields = new Map<string, Field>();

  constructor(
    private readonly kept: string,
    legend: string,
    wanted: readonly Wanted[],
  ) {
    const before = this.#remembered();
    this.element = h(
      "fieldset",
      { class: "fields" },
      h("legend", {}, legend),
      ...wanted.map(({ name, label, first, options, optional }) => {
        const value = before[name] ?? first;
        const field: Field = options
          ? h("select", { name }, ...options.map(([value, text]) => h("option", { value }, text)))
          : h("input", { name, autocomplete: "off", spellcheck: "false", required: optional !== true });
        field.value = value;
        field.addEventListener("change", () => this.#remember());
        this.#fields.set(name, field);
        return h("label", {}, label, field);
      }),
    );
  }

  value(name: string): string {
    return this.#fields.get(name)?.value.trim() ?? "";
  }

  set(name: string, value: string): void {
    const field = this.#fields.get(name);
    if (field && field.value !== value) field.value = value;
  }

  /** Other choices; what was chosen stays chosen where it can. */
  offer(name: string, options: readonly (readonly [string, string])[]): void {
    const field = this.#fields.get(name);
    if (!field) return;
    const chosen = field.value || this.#remembered()[name];
    field.replaceChildren(...options.map(([value, text]) => h("option", { value }, text)));
    const found = options.find(([value]) => value === chosen) ?? options[0];
    field.value = found?.[0] ?? "";
  }

  #remembered(): Record<string, string> {
    try {
      return JSON.parse(sessionStorage.getItem(this.kept) ?? "{}") as Record<string, string>;
    } catch {
      return {};
    }
  }

  #remember(): void {
    const all = Object.fromEntries([...this.#fields].map(([name, { value }]) => [name, value]));
    sessionStorage.setItem(this.kept, JSON.stringify(all));
  }
}

/** What the daemon says against something, with every finding of its check. */
export function refusal(lead: string, error: unknown): HTMLElement {
  const findings = error instanceof Refused ? (error.problem.findings ?? []) : [];
  return h(
    "div",
    { role: "alert" },
    h("p", { class: "trouble" }, `${lead}: ${reasonOf(error)}`),
    h(
      "ul",
      { class: "findings" },
      ...findings.map(({ severity, message, hint }) =>
        h("li", { "data-severity": severity }, h("strong", {}, severity), ` ${message}`, hint !== "" && h("span", { class: "hint" }, `; ${hint}`)),
      ),
    ),
  );
}
