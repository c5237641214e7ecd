import { requireCount } from './range-error.ts';

/**
 * Local maxima: above the left neighbour and not below the right one, so a flat top counts once, at its left end.
 *
 * @param values Any curve.
 * @param range First and last index considered; the ends of the curve are no maxima.
 * @returns Indices, rising.
 * @example 0, 2, 1, 3, 3, 0 gives 1 and 3.
 */
export function localMaxima(
  values: Float64Array,
  range: { readonly from?: number; readonly to?: number } = {},
): number[] {
  const first = Math.max(1, range.from ?? 1);
  const last = Math.min(values.length - 2, range.to ?? values.length - 2);
  const found: number[] = [];
  for (let i = first; i <= last; i++) {
    if (values[i]! > values[i - 1]! && values[i]! >= values[i + 1]!) found.push(i);
  }
  return found;
}

/**
 * Median of a sliding stretch, cut short at the ends: the floor of a spectrum, which lines do not lift.
 *
 * @param values A curve.
 * @param halfWidth Neighbours at each side that count.
 * @returns One median an index.
 * @throws SignalRangeError if halfWidth is not a whole number, 0 or more.
 * @example 1, 9, 2, 3 with half width 1: 5, 2, 3, 2.5.
 */
export function runningMedian(values: Float64Array, halfWidth: number): Float64Array {
  requireCount('halfWidth', halfWidth, 0);
  const n = values.length;
  const medians = new Float64Array(n);
  // Sorted stretch; one value leaves and one enters at each step.
  const sorted = new Float64Array(Math.min(n, 2 * halfWidth + 1));
  let count = 0;
  for (let i = 0; i < Math.min(n, halfWidth); i++) count = insert(sorted, count, values[i]!);
  for (let i = 0; i < n; i++) {
    const leaving = i - halfWidth - 1;
    const entering = i + halfWidth;
    if (leaving >= 0) count = remove(sorted, count, values[leaving]!);
    if (entering < n) count = insert(sorted, count, values[entering]!);
    medians[i] = middleOf(sorted, count);
  }
  return medians;
}

/**
 * Median of values.
 *
 * @param values At least one; left as they are.
 * @returns The middle one, or the mean of the two middle ones.
 * @throws SignalRangeError for none.
 * @example 3, 1, 2, 10 gives 2.5.
 */
export function median(values: Float64Array): number {
  requireCount('values.length', values.length, 1);
  return middleOf(values.slice().sort(), values.length);
}

function middleOf(sorted: Float64Array, count: number): number {
  const half = count >> 1;
  return count % 2 === 1 ? sorted[half]! : (sorted[half - 1]! + sorted[half]!) / 2;
}

function lowerBound(sorted: Float64Array, count: number, value: number): number {
  let low = 0;
  let high = count;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (sorted[middle]! < value) low = middle + 1;
    else high = middle;
  }
  return low;
}

function insert(sorted: Float64Array, count: number, value: number): number {
  const at = lowerBound(sorted, count, value);
  sorted.copyWithin(at + 1, at, count);
  sorted[at] = value;
  return count + 1;
}

function remove(sorted: Float64Array, count: number, value: number): number {
  const at = lowerBound(sorted, count, value);
  sorted.copyWithin(at, at + 1, count);
  return count - 1;
}
