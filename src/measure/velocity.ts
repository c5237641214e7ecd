/** Velocity and displacement figures of a spectrum: overall, the configured bands. */

import {
  displacementWaveform,
  displacementWeights,
  GRAVITY_M_S2,
  velocityWeights,
} from '../signal/integrate.ts';
import { SignalRangeError } from '../signal/range-error.ts';
import { bandMeanSquare, lineAmplitude, type Spectrum, strongestBin } from '../signal/spectrum.ts';
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
  return { value: bandRms(record.spectrum, bandHz, velocityWeights(record.spectrum, 'g')), why: null };
}

/** RMS displacement of a band, µm; limits as those of the velocity. */
export function displacementRms(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const out = outOfReach(record, bandHz, 'displacement');
  if (out !== null) return { value: null, why: out };
  return { value: bandRms(record.spectrum, bandHz, displacementWeights(record.spectrum, 'g')), why: null };
}

/** Peak to peak displacement of a band over the record, µm, from the time signal. */
export function displacementPeakToPeak(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const { samples, rateHz } = record;
  let waveform: Float64Array;
  try {
    waveform = displacementWaveform(samples, { rateHz, bandHz, unit: 'g' });
  } catch (error) {
    if (!(error instanceof SignalRangeError)) throw error;
    return { value: null, why: `record too short: no displacement over time from ${hz(bandHz[0])}` };
  }
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (const value of waveform) {
    if (value < low) low = value;
    if (value > high) high = value;
  }
  return { value: high - low, why: null };
}

/** The strongest line about a frequency: its place and RMS velocity in mm/s; null where there is no bin. */
export function lineVelocity(
  spectrum: Spectrum,
  hz: number,
  reachHz: number,
): { hz: number; mmS: number } | null {
  const bin = strongestBin(spectrum, [hz - reachHz, hz + reachHz]);
  if (bin === null) return null;
  const line = lineAmplitude(spectrum, bin);
  const mmS = ((line.amplitude / Math.SQRT2) * 1000 * GRAVITY_M_S2) / (2 * Math.PI * line.hz);
  return { hz: line.hz, mmS };
}

function bandRms(spectrum: Spectrum, bandHz: readonly [number, number], weight: Float64Array): number {
  return Math.sqrt(bandMeanSquare(spectrum, bandHz, { weight }));
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
