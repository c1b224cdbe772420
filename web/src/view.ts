// What every view of the page is: made when one goes there, told of the bench, ended when one
// leaves.

import type { Bench } from "./core/bench.ts";

export interface View {
  /** What the window is called. */
  title: string;
  element: HTMLElement;
  /** The bench is otherwise than before. */
  update(bench: Bench): void;
  /** One leaves: requests and timers end. */
  close(): void;
}
