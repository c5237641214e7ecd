/**
 * Rounds a measured figure to the four significant digits that are published; null for what is no number. A figure
 * that is judged against a limit is judged as rounded, or a reader would see 4.5 over a limit of 4.5.
 *
 * @param value any unit
 * @returns the nearest number with four significant decimal digits; `rounded(110.3567)` is 110.4
 */
export function rounded(value: number): number | null {
  return Number.isFinite(value) ? Number(value.toPrecision(4)) : null;
}
