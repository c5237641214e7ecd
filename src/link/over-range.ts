/** How many of values[start..end) are at or beyond the limits of the converter. */
export function countAtLimits(
  values: Int32Array,
  start: number,
  end: number,
  low: number,
  high: number,
): number {
  let count = 0;
  for (let i = start; i < end; i++) {
    const value = values[i]!;
    if (value <= low || value >= high) count++;
  }
  return count;
}
