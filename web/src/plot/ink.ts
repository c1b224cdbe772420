// The colours of a plot: those of the page, so that paper and night are the same for both.

export interface Ink {
  line: string;
  faint: string;
  rule: string;
  accent: string;
  shade: string;
  paper: string;
  font: string;
}

export function inkOf(element: Element): Ink {
  const style = getComputedStyle(element);
  const of = (name: string): string => style.getPropertyValue(name).trim();
  return {
    line: of("--ink"),
    faint: of("--faint"),
    rule: of("--rule"),
    accent: of("--accent"),
    shade: of("--shade"),
    paper: of("--paper"),
    font: style.fontFamily,
  };
}

/** Tells when day and night change. */
export function onInkChange(change: () => void): () => void {
  const night = matchMedia("(prefers-color-scheme: dark)");
  night.addEventListener("change", change);
  return () => night.removeEventListener("change", change);
}
