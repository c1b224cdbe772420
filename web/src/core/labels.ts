// Where the labels of a plot stand so that none covers another: pure.

/** Moves labels down, and then up, so that each has its height and all stay between two ends. */
export function spread(wanted: readonly number[], height: number, top: number, bottom: number): number[] {
  const order = wanted.map((y, index) => ({ y, index })).sort((a, b) => a.y - b.y);
  let least = top;
  for (const label of order) {
    label.y = Math.max(label.y, least);
    least = label.y + height;
  }
  let most = bottom;
  for (const label of order.reverse()) {
    label.y = Math.min(label.y, most);
    most = label.y - height;
  }
  const placed = [...wanted];
  for (const { y, index } of order) placed[index] = y;
  return placed;
}

/** A tick of a time axis, in the unit that its neighbours' distance asks for. */
export function timeTick(seconds: number, distance: number): string {
  const sign = seconds < 0 ? "\u2212" : "";
  const total = Math.abs(seconds);
  if (distance < 1) {
    // Parts of a second beside whole hours, as in 6:50:23.4 h.
    const digits = distance < 0.01 ? 3 : distance < 0.1 ? 2 : 1;
    if (total < 600) return `${sign}${total.toFixed(digits)} s`;
    const whole = Math.floor(total + 1e-9);
    const part = Math.min(total - whole, 1 - 10 ** -digits).toFixed(digits).slice(1);
    return timeTick(seconds < 0 ? -whole : whole, 1).replace(/ (min|h)$/, `${part} $1`);
  }
  const rounded = Math.round(total);
  const two = (value: number): string => String(value).padStart(2, "0");
  if (distance < 60) {
    if (rounded < 600) return `${sign}${rounded} s`;
    const [minutes, rest] = [Math.floor(rounded / 60), two(rounded % 60)];
    if (rounded < 3600) return `${sign}${minutes}:${rest} min`;
    return `${sign}${Math.floor(minutes / 60)}:${two(minutes % 60)}:${rest} h`;
  }
  if (distance < 3600) {
    const hours = Math.floor(rounded / 3600);
    if (hours === 0) return `${sign}${Math.round(rounded / 60)} min`;
    return `${sign}${hours}:${two(Math.floor((rounded % 3600) / 60))} h`;
  }
  if (distance < 86_400 || rounded < 172_800) return `${sign}${Math.round(rounded / 3600)} h`;
  return `${sign}${Math.round(rounded / 86_400)} d`;
}

/** Distances between ticks of a time axis that a person counts in. */
export const TIME_STEPS: readonly number[] = [
  0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900,
  1800, 3600, 7200, 10_800, 21_600, 43_200, 86_400, 172_800, 432_000, 864_000,
];
