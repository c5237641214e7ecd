/** Velocity and displacement figures of a spectrum: overall, the configured bands. */

import { displacementWaveform, displacementWeights, velocityWeights } from '../signal/integrate.ts';
import { bandMeanSquare, type Spectrum } from '../signal/spectrum.ts';
import { mainLobeHalfWidthBins } from '../signal/window.ts';
import type { DecimatedRecord } from './decimated.ts';
import { hz, range } from './plan-notes.ts';

/** A figure, or why it cannot be had. */
export type Figure =
  | { readonly value: number; readonly why: null }
  | { readonly value: null; readonly why: string };

/**
 * RMS velocity of a band, mm/s.
 *
 * @param name of the figure, for the reason.
 * @returns no value where the band reaches beyond what the record carries, or lies so near to 0 Hz that the lines
 *   cannot keep it apart from the record's own drift.
 */
export function velocityRms(
  record: DecimatedRecord,
  bandHz: readonly [number, number],
  name: string,
): Figure {
  const out = outOfReach(record, bandHz, name);
  if (out !== null) return { value: null, why: out };
  const weight = velocityWeights(record.spectrum, 'g');
  return { value: Math.sqrt(bandMeanSquare(record.spectrum, bandHz, { weight })), why: null };
}

/** RMS displacement of a band, µm; limits as those of the velocity. */
export function displacementRms(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const out = outOfReach(record, bandHz, 'displacement');
  if (out !== null) return { value: null, why: out };
  const weight = displacementWeights(record.spectrum, 'g');
  return { value: Math.sqrt(bandMeanSquare(record.spectrum, bandHz, { weight })), why: null };
}

/** Peak to peak displacement of a band over the record, µm, from the time signal. */
export function displacementPeakToPeak(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const { samples, rateHz } = record;
  // Three periods of the lower edge fade in and out; as many again must be left.
  if (samples.length <= Math.ceil((3 * rateHz) / bandHz[0]) * 4) {
    return { value: null, why: `record too short: no displacement over time from ${hz(bandHz[0])}` };
  }
  const waveform = displacementWaveform(samples, { rateHz, bandHz, unit: 'g' });
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (const value of waveform) {
    if (value < low) low = value;
    if (value > high) high = value;
  }
  return { value: high - low, why: null };
}

function outOfReach(record: DecimatedRecord, bandHz: readonly [number, number], name: string): string | null {
  const { spectrum, fmaxHz } = record;
  // A hair above: a band that ends at Fmax is in reach whatever the last bit.
  if (bandHz[1] > fmaxHz * (1 + 1e-9)) {
    return `${name}: ${range(bandHz)} reaches above Fmax, ${hz(fmaxHz)}`;
  }
  const leastHz = lowestHz(spectrum);
  if (bandHz[0] < leastHz) {
    return `record too short: ${name} from ${hz(bandHz[0])} needs lines finer than ${hz(spectrum.lineHz)}`;
  }
  return null;
}

/** Below this the main lobe of a line reaches to 0 Hz. */
function lowestHz(spectrum: Spectrum): number {
  return mainLobeHalfWidthBins(spectrum.window) * spectrum.lineHz;
}
