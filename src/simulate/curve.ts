/** A figure that may change over time: a constant, or corner points [seconds, value] joined by straight lines. */
export type Curve = number | readonly (readonly [number, number])[];

/** The value at `timeS`; before the first corner and after the last one it stays at theirs. */
export function curveAt(curve: Curve, timeS: number): number {
  if (typeof curve === 'number') return curve;
  let previous = curve[0];
  if (previous === undefined) throw new RangeError('curve: at least one corner [seconds, value] is needed');
  for (const corner of curve) {
    if (timeS < corner[0]) {
      const span = corner[0] - previous[0];
      return span > 0
        ? previous[1] + ((corner[1] - previous[1]) * (timeS - previous[0])) / span
        : previous[1];
    }
    previous = corner;
  }
  return previous[1];
}

/** Whether the figure is zero at all times, so that what it drives can be left out. */
export function isAlwaysZero(curve: Curve): boolean {
  return typeof curve === 'number' ? curve === 0 : curve.every(([, value]) => value === 0);
}
