import { complexBand, type RecordTransform } from './envelope.ts';
import { requireCount, SignalRangeError } from './range-error.ts';

export interface KurtogramOptions {
  /** Bands that reach below are left out, Hz. */
  readonly minHz: number;
  /** Bands that reach above are left out, Hz; half the rate if not given. */
  readonly maxHz?: number;
  /** Finest level, 0 to 8: k has 2^k bands of 0..rate/2, and beside it k + 0.6 has 3·2^(k−1) for k from 1. */
  readonly maxLevel: number;
}

interface KurtogramBand {
  /** 0, 1, 1.6, 2, 2.6 … */
  readonly level: number;
  readonly bandHz: [number, number];
  /** E|c|⁴/(E|c|²)² − 2: 0 for Gaussian noise, −1 for a lone sine, above 0 for impulses. */
  readonly kurtosis: number;
}

export interface Kurtogram {
  /** The band of the largest kurtosis. */
  readonly best: KurtogramBand;
  /** Every band that was tried, by level and frequency. */
  readonly table: readonly KurtogramBand[];
}

/** Fewest samples of a band from which a kurtosis is taken: its standard error is then below 0.15. */
const LEAST_SAMPLES = 256;

/**
 * Spectral kurtosis over a tree of bands: where in the spectrum the signal is impulsive.
 *
 * @param transform From `recordTransform`.
 * @param options Range and depth of the tree.
 * @returns The best band and all that were tried.
 * @throws SignalRangeError if no band fits the range or the record is too short for any.
 * @see Antoni 2007, MSSP 21, 108–124.
 * @example A lone sine in a band gives −1 there.
 */
export function kurtogram(transform: RecordTransform, options: KurtogramOptions): Kurtogram {
  const { minHz, maxLevel } = options;
  const nyquistHz = transform.rateHz / 2;
  const maxHz = options.maxHz ?? nyquistHz;
  requireCount('maxLevel', maxLevel, 0);
  if (maxLevel > 8) throw new SignalRangeError('maxLevel', maxLevel, 'needs at most 8');
  const table: KurtogramBand[] = [];
  for (let k = 0; k <= maxLevel; k++) {
    tryLevel(k, 2 ** k);
    if (k >= 1) tryLevel(k + 0.6, 3 * 2 ** (k - 1));
  }
  function tryLevel(level: number, bands: number): void {
    for (let b = 0; b < bands; b++) {
      const lowHz = (b * nyquistHz) / bands;
      const highHz = ((b + 1) * nyquistHz) / bands;
      if (lowHz < minHz || highHz > maxHz) continue;
      const kurtosis = bandKurtosis(transform, [lowHz, highHz]);
      if (kurtosis !== null) table.push({ level, bandHz: [lowHz, highHz], kurtosis });
    }
  }
  const best = table.reduce<KurtogramBand | null>(
    (a, b) => (a === null || b.kurtosis > a.kurtosis ? b : a),
    null,
  );
  if (best === null) {
    throw new SignalRangeError(
      'minHz',
      minHz,
      `leaves no band up to ${maxHz} Hz at level ${maxLevel} in this record`,
    );
  }
  return { best, table };
}

/** null: too few samples, or nothing in the band. */
function bandKurtosis(transform: RecordTransform, bandHz: [number, number]): number | null {
  // Moments need no more samples than the band itself: sampled at its width, folding of the square does no harm.
  const { values } = complexBand(transform, { bandHz, fmaxHz: 0 });
  const n = values.length / 2;
  if (n < LEAST_SAMPLES) return null;
  let second = 0;
  let fourth = 0;
  for (let i = 0; i < values.length; i += 2) {
    const square = values[i]! * values[i]! + values[i + 1]! * values[i + 1]!;
    second += square;
    fourth += square * square;
  }
  return second > 0 ? (fourth * n) / (second * second) - 2 : null;
}
