// The little that a page without a framework needs: making elements, setting what has changed,
// keeping a list of elements in step with a list of things.

type Child = Node | string | null | false;
type Attributes = Record<string, string | number | boolean | null | undefined | ((event: Event) => void)>;

/** An element with attributes, listeners (`onclick`, ...) and children. */
export function h<K extends keyof HTMLElementTagNameMap>(
  tag: K,
  attributes: Attributes = {},
  ...children: Child[]
): HTMLElementTagNameMap[K] {
  const element = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (typeof value === "function") element.addEventListener(name.slice(2), value);
    else attribute(element, name, value);
  }
  element.append(...children.filter((child) => child !== null && child !== false));
  return element;
}

/** Sets an attribute, or takes it away; touches nothing that is so already. */
export function attribute(
  element: Element,
  name: string,
  value: string | number | boolean | null | undefined,
): void {
  if (value === null || value === undefined || value === false) {
    if (element.hasAttribute(name)) element.removeAttribute(name);
    return;
  }
  const text = value === true ? "" : String(value);
  if (element.getAttribute(name) !== text) element.setAttribute(name, text);
}

/** Sets a text; touches nothing that is so already. */
export function write(element: Node, text: string): void {
  if (element.textContent !== text) element.textContent = text;
}

export function show(element: HTMLElement, visible: boolean): void {
  if (element.hidden === visible) element.hidden = !visible;
}

/** A part of the page that is made once for a thing and then follows it. */
export interface Part<T> {
  element: HTMLElement;
  update(thing: T): void;
}

/** Keeps the children of an element in step with things, by a key of each: what stays is updated
 * in its place, so that neither the focus nor a selection is lost. */
export class List<T> {
  readonly #parts = new Map<string, Part<T>>();

  constructor(
    private readonly parent: HTMLElement,
    private readonly key: (thing: T) => string,
    private readonly make: (thing: T) => Part<T>,
  ) {}

  update(things: readonly T[]): void {
    const gone = new Set(this.#parts.keys());
    let place = this.parent.firstElementChild;
    for (const thing of things) {
      const key = this.key(thing);
      gone.delete(key);
      let part = this.#parts.get(key);
      if (!part) {
        part = this.make(thing);
        this.#parts.set(key, part);
      }
      part.update(thing);
      if (part.element === place) place = place.nextElementSibling;
      else this.parent.insertBefore(part.element, place);
    }
    for (const key of gone) {
      this.#parts.get(key)?.element.remove();
      this.#parts.delete(key);
    }
  }
}

/** What someone reads of an error. */
export const reasonOf = (error: unknown): string =>
  error instanceof Error ? error.message : String(error);

export const isAbort = (error: unknown): boolean =>
  error instanceof DOMException && error.name === "AbortError";
