/** Spectra one after the other over a whole recording: what moves with the speed and what stays where it is. */

import type { DecimatedRecord } from '../measure/decimated.ts';
import { averagedSpectrum } from '../signal/spectrum.ts';
import { velocityCurve } from './spectra.ts';

export interface Cascade {
  readonly stepHz: number;
  /** Frequency of the first value of each slice. */
  readonly firstHz: number;
  readonly bins: number;
  /** Middle of each slice, seconds from the start of the recording. */
  readonly timesS: readonly number[];
  /** mm/s RMS, slice after slice. */
  readonly values: Float32Array;
}

/** A slice resolves about 1 Hz where the recording is long enough. */
const SLICE_S = 1;
const MOST_SLICES = 48;
const LEAST_SLICES = 6;
/** Below this velocity is drift, whatever the machine does. */
const LOWEST_HZ = 2;
/** What moves with the speed shows in its first orders. */
const ORDERS = 8;
const USUAL_TOP_HZ = 300;

/**
 * @param whole the whole recording, decimated.
 * @param shaftHz highest speed found in it; null: none.
 * @returns null where the recording is too short for a row of slices.
 */
export function cascadeOf(whole: DecimatedRecord, shaftHz: number | null): Cascade | null {
  const { samples, rateHz, fmaxHz, firstAt, factor } = whole;
  const seconds = samples.length / rateHz;
  const block = Math.floor(Math.min(SLICE_S, seconds / 4) * rateHz);
  const slices = Math.min(MOST_SLICES, Math.floor((2 * (samples.length - block)) / block) + 1);
  if (block < 64 || slices < LEAST_SLICES) return null;
  const topHz = Math.min(fmaxHz, shaftHz === null ? USUAL_TOP_HZ : ORDERS * shaftHz);
  const starts = Array.from({ length: slices }, (_, k) =>
    Math.round((k * (samples.length - block)) / (slices - 1)),
  );
  const curves = starts.map((from) => {
    const slice = samples.subarray(from, from + block);
    return velocityCurve(averagedSpectrum(slice, { rateHz, blockSamples: block, window: 'hann' }), topHz);
  });
  const { stepHz, lineHz } = curves[0]!;
  const firstBin = Math.ceil(Math.max(LOWEST_HZ, 2 * lineHz) / stepHz);
  const bins = curves[0]!.values.length - firstBin;
  if (bins < 8) return null;
  const values = new Float32Array(bins * slices);
  curves.forEach((curve, k) => {
    values.set(curve.values.subarray(firstBin), k * bins);
  });
  const rawRateHz = rateHz * factor;
  const timesS = starts.map((from) => (firstAt + (from + block / 2) * factor) / rawRateHz);
  return { stepHz, firstHz: firstBin * stepHz, bins, timesS, values };
}
