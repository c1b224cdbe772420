// Fingers on a plot: one reads off, two zoom. The page still scrolls up and down.

export interface Fingers {
  /** A range as many times as long, around a place given as a share of the width. */
  zoom(factor: number, share: number): void;
  /** Reads off at a place of the window. */
  read(clientX: number): void;
}

export function pinch(element: HTMLElement, fingers: Fingers): () => void {
  const down = new Map<number, number>();
  let apart = 0;

  const distance = (): number => {
    const [one, other] = [...down.values()];
    return one === undefined || other === undefined ? 0 : Math.abs(one - other);
  };
  const begin = (event: PointerEvent): void => {
    if (event.pointerType !== "touch") return;
    down.set(event.pointerId, event.clientX);
    apart = distance();
    if (down.size === 1) fingers.read(event.clientX);
  };
  const move = (event: PointerEvent): void => {
    if (!down.has(event.pointerId)) return;
    down.set(event.pointerId, event.clientX);
    if (down.size === 1) fingers.read(event.clientX);
    const now = distance();
    if (down.size !== 2 || now < 20 || apart < 20) return;
    const box = element.getBoundingClientRect();
    const middle = [...down.values()].reduce((sum, x) => sum + x, 0) / 2;
    fingers.zoom(apart / now, Math.min(1, Math.max(0, (middle - box.left) / box.width)));
    apart = now;
  };
  const end = (event: PointerEvent): void => {
    down.delete(event.pointerId);
    apart = distance();
  };
  element.addEventListener("pointerdown", begin);
  element.addEventListener("pointermove", move);
  for (const name of ["pointerup", "pointercancel"] as const) element.addEventListener(name, end);
  return () => {
    element.removeEventListener("pointerdown", begin);
    element.removeEventListener("pointermove", move);
    for (const name of ["pointerup", "pointercancel"] as const) element.removeEventListener(name, end);
  };
}
