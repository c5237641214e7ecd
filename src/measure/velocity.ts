/** Velocity and displacement figures of a spectrum: overall, the configured bands. */

import {
  DISPLACEMENT_PERIODS,
  displacementWaveform,
  displacementWeights,
  GRAVITY_M_S2,
  velocityWeights,
} from '../signal/integrate.ts';
import { SignalRangeError } from '../signal/range-error.ts';
import {
  type BandEdges,
  bandMeanSquare,
  lineAmplitude,
  type Spectrum,
  strongestBin,
} from '../signal/spectrum.ts';
import type { DecimatedRecord } from './decimated.ts';
import { hz, range, tooLow } from './plan-notes.ts';

/** A figure, or why it cannot be had; `settled`: it is simply not there, and no other figure is the worse for it. */
export type Figure =
  | { readonly value: number; readonly why: null; readonly settled: false }
  | { readonly value: null; readonly why: string; readonly settled: boolean };

/**
 * RMS velocity of a band, mm/s.
 *
 * @param name of the figure, for the reason.
 * @param edges `whole` for the overall, as ISO 2954 wants it; `shared` where bands stand side by side.
 * @returns no value where the band reaches beyond what the record carries, or lies so near to 0 Hz that the lines
 *   cannot keep it apart from the record's own drift.
 */
export function velocityRms(
  record: DecimatedRecord,
  bandHz: readonly [number, number],
  name: string,
  edges: BandEdges,
): Figure {
  const out = outOfReach(record, bandHz, name);
  if (out !== null) return out;
  const { spectrum } = record;
  return figure(bandMeanSquare(spectrum, bandHz, { weight: velocityWeights(spectrum, 'g'), edges }));
}

/** RMS displacement of a band, µm; limits as those of the velocity. */
export function displacementRms(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const out = outOfReach(record, bandHz, 'displacement');
  if (out !== null) return out;
  const { spectrum } = record;
  return figure(bandMeanSquare(spectrum, bandHz, { weight: displacementWeights(spectrum, 'g') }));
}

/** Peak to peak displacement of a band over the record, µm, from the time signal. */
export function displacementPeakToPeak(record: DecimatedRecord, bandHz: readonly [number, number]): Figure {
  const { samples, rateHz } = record;
  let waveform: Float64Array;
  try {
    waveform = displacementWaveform(samples, { rateHz, bandHz, unit: 'g' });
  } catch (error) {
    if (!(error instanceof SignalRangeError)) throw error;
    const why = `no displacement over time from ${hz(bandHz[0])}: that takes ${Math.ceil(DISPLACEMENT_PERIODS)} periods`;
    return { value: null, why, settled: true };
  }
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (const value of waveform) {
    if (value < low) low = value;
    if (value > high) high = value;
  }
  return { value: high - low, why: null, settled: false };
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

function figure(meanSquare: number): Figure {
  return { value: Math.sqrt(meanSquare), why: null, settled: false };
}

function outOfReach(record: DecimatedRecord, bandHz: readonly [number, number], name: string): Figure | null {
  const { fmaxHz, plannedLineHz, shortLineHz } = record;
  // A hair above: a band that ends at Fmax is in reach whatever the last bit.
  if (bandHz[1] > fmaxHz * (1 + 1e-9)) {
    const why = `${name}: ${range(bandHz)} reaches above Fmax, ${hz(fmaxHz)}`;
    return { value: null, why, settled: true };
  }
  const { window } = record.spectrum;
  const settings = tooLow(bandHz[0], { lineHz: plannedLineHz, window }, name);
  if (settings !== null) return { value: null, why: `${settings}: give more lines`, settled: true };
  const short = tooLow(bandHz[0], { lineHz: shortLineHz, window }, name);
  return short === null ? null : { value: null, why: `record too short: ${short}`, settled: false };
}
