import { requireCount } from './range-error.ts';

export interface Statistics {
  readonly mean: number;
  /** Root mean square about the mean. */
  readonly rms: number;
  /** Largest distance from the mean. */
  readonly peak: number;
  readonly peakToPeak: number;
  /** peak / rms; null where nothing moves. */
  readonly crest: number | null;
  /** Fourth standardised moment, 3 for a Gaussian; null where nothing moves. */
  readonly kurtosis: number | null;
  /** Third standardised moment; null where nothing moves. */
  readonly skewness: number | null;
}

/**
 * Mean and the figures about it, in two passes (moments about the true mean: no cancellation by a large offset).
 *
 * @param x Samples, at least one.
 * @returns In the unit of x; ratios without unit.
 * @throws SignalRangeError for no samples.
 * @see Population moments, as in any textbook of statistics.
 * @example 1, 2, 3, 4: mean 2.5, rms 1.1180, peak 1.5, crest 1.3416, kurtosis 1.64, skewness 0.
 */
export function statistics(x: Float64Array): Statistics {
  const n = x.length;
  requireCount('x.length', n, 1);
  let sum = 0;
  let low = x[0]!;
  let high = low;
  for (let i = 0; i < n; i++) {
    const value = x[i]!;
    sum += value;
    if (value < low) low = value;
    if (value > high) high = value;
  }
  const mean = sum / n;
  let second = 0;
  let third = 0;
  let fourth = 0;
  for (let i = 0; i < n; i++) {
    const distance = x[i]! - mean;
    const square = distance * distance;
    second += square;
    third += square * distance;
    fourth += square * square;
  }
  const peakToPeak = high - low;
  const variance = second / n;
  const rms = Math.sqrt(variance);
  const peak = Math.max(high - mean, mean - low);
  // A constant's own rounding error about its mean is no movement.
  const moves = peakToPeak > 0;
  return {
    mean,
    rms: moves ? rms : 0,
    peak: moves ? peak : 0,
    peakToPeak,
    crest: moves ? peak / rms : null,
    kurtosis: moves ? fourth / n / (variance * variance) : null,
    skewness: moves ? third / n / (variance * rms) : null,
  };
}

/**
 * Mean frequency: that of the sine which changes as much from sample to sample for its size. It does not depend on the
 * level, and rises and falls with where the power lies.
 *
 * @param x Samples, their mean removed, at least two.
 * @param rateHz Sample rate, Hz.
 * @returns Hz, 0 to half the rate; null where nothing moves.
 * @throws SignalRangeError for fewer than two samples.
 * @see Rice 1944, Bell System Technical Journal 23: root of the ratio of spectral moments (from memory).
 * @example A sine of 100 Hz gives 100; white noise at rate R gives R/4.
 */
export function meanFrequency(x: Float64Array, rateHz: number): number | null {
  requireCount('x.length', x.length, 2);
  let square = 0;
  let steps = 0;
  for (let i = 1; i < x.length; i++) {
    const step = x[i]! - x[i - 1]!;
    steps += step * step;
    // Both ends of the step, so that the ends of the stretch weigh alike.
    square += (x[i]! * x[i]! + x[i - 1]! * x[i - 1]!) / 2;
  }
  if (!(square > 0)) return null;
  return (rateHz / Math.PI) * Math.asin(Math.min(1, Math.sqrt(steps / square) / 2));
}
