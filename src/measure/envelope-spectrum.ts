/** The spectrum of one band's squared envelope, and the lines that stand out of it. */

import type { EnvelopeLine, LineSet } from '../machine/evidence-lines.ts';
import { chooseFactor, decimate, planDecimation } from '../signal/decimate.ts';
import { bandEnvelope, type RecordTransform } from '../signal/envelope.ts';
import { localMaxima, runningMedian } from '../signal/peaks.ts';
import { averagedSpectrum, lineAmplitude, lineAmplitudes, type Spectrum } from '../signal/spectrum.ts';
import { ATTENUATION_DB } from './plan.ts';

/** The floor is the median over this many hertz about a line: wide enough that a comb and its sidebands do not lift it. */
const FLOOR_WIDTH_HZ = 40;
/** Below this only drift lives. */
const LOWEST_LINE_HZ = 2;

/** Squared envelope of a band, sampled just fast enough for the wanted spectrum. */
export interface BandEnvelope {
  readonly bandHz: readonly [number, number];
  readonly values: Float64Array;
  readonly rateHz: number;
  /** Over the whole stretch, in the square of the signal's unit. */
  readonly mean: number;
}

export interface EnvelopeSpectrum {
  readonly spectrum: Spectrum;
  /** Amplitude at each bin, and the local median of it. */
  readonly amplitudes: Float64Array;
  readonly floor: Float64Array;
  readonly fmaxHz: number;
}

/**
 * Squared envelope of one band of a record, decimated for a spectrum up to `fmaxHz`.
 *
 * Worked: (1 + 0.5·cos 2πf_m t)·unit carrier has mean 1.125 (identity).
 */
export function envelopeOfBand(
  transform: RecordTransform,
  bandHz: readonly [number, number],
  fmaxHz: number,
): BandEnvelope {
  const envelope = bandEnvelope(transform, { bandHz, fmaxHz });
  const mean = envelope.values.reduce((sum, value) => sum + value, 0) / envelope.values.length;
  // An envelope of a narrow band is slow already, and may be too slow for fmaxHz: its spectrum ends where the band does.
  const carriedHz = Math.min(fmaxHz, envelope.rateHz / 2.56);
  const plan = planDecimation({
    rateHz: envelope.rateHz,
    factor: chooseFactor(envelope.rateHz, carriedHz),
    fmaxHz: carriedHz,
    attenuationDb: ATTENUATION_DB,
  });
  return { bandHz: envelope.bandHz, values: decimate(plan, envelope.values), rateHz: plan.outRateHz, mean };
}

/** Averaged spectrum (Hann, half-overlapped) of a squared envelope: blocks of `blockS` seconds, at least two of them. */
export function spectrumOfEnvelope(envelope: BandEnvelope, blockS: number, fmaxHz: number): EnvelopeSpectrum {
  const { rateHz, values } = envelope;
  const blockSamples = Math.min(Math.round(blockS * rateHz), Math.floor((values.length - 1) / 1.5));
  const spectrum = averagedSpectrum(values, { rateHz, blockSamples, window: 'hann' });
  const bins = Math.min(spectrum.meanSquare.length, Math.ceil(fmaxHz / spectrum.binHz) + 2);
  const amplitudes = lineAmplitudes(spectrum).subarray(0, bins);
  const floor = runningMedian(amplitudes, Math.round(FLOOR_WIDTH_HZ / 2 / spectrum.binHz));
  return { spectrum, amplitudes, floor, fmaxHz };
}

/**
 * The lines of a spectrum for the judgement of bearings: local maxima from 2 Hz up that stand `overFloor` times above
 * the floor, the strongest within 1.5/T of each other, with depths relative to the envelope's mean.
 */
export function linesOf(s: EnvelopeSpectrum, mean: number, overFloor: number): LineSet {
  const { spectrum, amplitudes, floor } = s;
  const from = Math.ceil(LOWEST_LINE_HZ / spectrum.binHz);
  const found: EnvelopeLine[] = localMaxima(amplitudes, { from })
    .filter((bin) => amplitudes[bin]! >= overFloor * floor[bin]!)
    .map((bin) => {
      const { hz, amplitude } = lineAmplitude(spectrum, bin);
      return { hz, depth: amplitude / mean };
    })
    .sort((a, b) => b.depth - a.depth);
  const apartHz = 1.5 * spectrum.lineHz;
  const kept: EnvelopeLine[] = [];
  for (const line of found) {
    if (!kept.some((other) => Math.abs(other.hz - line.hz) < apartHz)) kept.push(line);
  }
  return { resolutionHz: spectrum.lineHz, lines: kept.sort((a, b) => a.hz - b.hz) };
}
