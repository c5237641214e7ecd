/** The curves of a report, by the code that measures: what they show is what the reading's figures were made of. */

import { decimateRecord } from '../measure/decimated.ts';
import { CUT_S } from '../measure/envelope.ts';
import { envelopeOfBand, spectrumOfEnvelope } from '../measure/envelope-spectrum.ts';
import type { PointPlan } from '../measure/plan.ts';
import { ENVELOPE_EDGE_S } from '../measure/plan-envelope.ts';
import { RATE_OVER_FMAX } from '../measure/plan-notes.ts';
import type { Reading } from '../measure/reading.ts';
import { recordTransform } from '../signal/envelope.ts';
import { nextPowerOfTwo } from '../signal/fft.ts';
import { velocityWeights } from '../signal/integrate.ts';
import { averagedSpectrum, lineAmplitudes, type Spectrum } from '../signal/spectrum.ts';
import { mainLobeHalfWidthBins, type WindowName } from '../signal/window.ts';

/** Value k stands at k·stepHz. */
export interface Curve {
  readonly stepHz: number;
  /** Distance at which two lines can be told apart. */
  readonly lineHz: number;
  readonly window: WindowName;
  readonly averages: number;
  readonly values: Float32Array;
}

export interface RecordCurves {
  /** mm/s RMS of a line, up to Fmax; null: the record is too short. */
  readonly velocity: Curve | null;
  /** g RMS of a line, over all that the rate carries. */
  readonly acceleration: Curve | null;
  /** g², amplitude of a line of the squared envelope; null: the reading has no envelope. */
  readonly envelope: Curve | null;
}

/** Lines of the wide acceleration spectrum: fine enough for vane and tooth frequencies. */
const WIDE_LINE_HZ = 5;
const LEAST_BLOCK = 64;
/** As for a reading's envelope: two half-overlapped blocks at least. */
const LEAST_BLOCKS = 1.5;

/**
 * @param acceleration the whole record in g; its mean may be left in.
 * @param reading what was measured from it.
 */
export function recordCurves(
  plan: PointPlan,
  acceleration: Float64Array,
  rateHz: number,
  reading: Reading,
): RecordCurves {
  if (reading.quality === 'bad') {
    // What the figures cannot be trusted with, the eye may still want to see.
    return { velocity: null, acceleration: wideAcceleration(acceleration, rateHz), envelope: null };
  }
  const decimated = decimateRecord(plan, acceleration, rateHz);
  return {
    velocity: decimated && velocityCurve(decimated.spectrum, decimated.fmaxHz),
    acceleration: wideAcceleration(acceleration, rateHz),
    envelope: envelopeCurve(plan, acceleration, rateHz, reading),
  };
}

/** Velocity of each bin, mm/s RMS. */
export function velocityCurve(spectrum: Spectrum, fmaxHz: number): Curve {
  const weights = velocityWeights(spectrum, 'g');
  const lines = lineAmplitudes(spectrum).map((g, k) => (g / Math.SQRT2) * Math.sqrt(weights[k]!));
  return curveOf(spectrum, lines, fmaxHz);
}

function wideAcceleration(acceleration: Float64Array, rateHz: number): Curve | null {
  const longest = Math.floor(acceleration.length / LEAST_BLOCKS);
  if (longest < LEAST_BLOCK) return null;
  const blockSamples = Math.min(nextPowerOfTwo(rateHz / WIDE_LINE_HZ), longest);
  const spectrum = averagedSpectrum(acceleration, { rateHz, blockSamples, window: 'hann' });
  const lines = lineAmplitudes(spectrum).map((amplitude) => amplitude / Math.SQRT2);
  return curveOf(spectrum, lines, rateHz / RATE_OVER_FMAX);
}

function envelopeCurve(
  plan: PointPlan,
  acceleration: Float64Array,
  rateHz: number,
  reading: Reading,
): Curve | null {
  if (plan.envelope === null || reading.envelope === null) return null;
  const { fmaxHz } = plan.envelope;
  const longestS = (acceleration.length / rateHz - 2 * ENVELOPE_EDGE_S) / LEAST_BLOCKS;
  const transform = recordTransform(acceleration, { rateHz, cutS: CUT_S });
  const envelope = envelopeOfBand(transform, reading.envelope.band_hz, fmaxHz);
  const { spectrum, amplitudes } = spectrumOfEnvelope(
    envelope,
    Math.min(plan.envelope.blockS, longestS),
    fmaxHz,
  );
  return curveOf(spectrum, amplitudes, fmaxHz);
}

function curveOf(spectrum: Spectrum, lines: Float64Array, fmaxHz: number): Curve {
  const { binHz: stepHz, lineHz, averages, window } = spectrum;
  const bins = Math.min(lines.length, Math.floor(fmaxHz / stepHz) + 1);
  const values = Float32Array.from(lines.subarray(0, bins));
  // Nearer to 0 Hz a line cannot be told from drift.
  values.fill(0, 0, Math.ceil((mainLobeHalfWidthBins(window) * lineHz) / stepHz));
  return { stepHz, lineHz, window, averages, values };
}
