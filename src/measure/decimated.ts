/** The decimated acceleration of a record and its averaged spectrum, or what of them a short record leaves. */

import { type DecimationPlan, decimate } from '../signal/decimate.ts';
import { averagedSpectrum, type Spectrum } from '../signal/spectrum.ts';
import { decimationOf, type PointPlan } from './plan.ts';

export interface DecimatedRecord {
  readonly samples: Float64Array;
  /** Measured, not nominal. */
  readonly rateHz: number;
  /** Highest frequency that the filter keeps clean at the measured rate, Fmax at most. */
  readonly fmaxHz: number;
  /** Where sample 0 stands in the record, and how far the next is, in raw samples. */
  readonly firstAt: number;
  readonly factor: number;
  readonly spectrum: Spectrum;
  /** Spacing of the lines as planned, at the nominal rate: what settings allow does not hang on a clock's drift. */
  readonly plannedLineHz: number;
  /** The same, or wider where the record is too short for it. */
  readonly shortLineHz: number;
  /** null, or what is missing of the averages and lines asked for. */
  readonly short: string | null;
}

/** A spectrum of fewer samples tells nothing. */
const LEAST_BLOCK = 32;
const decimations = new WeakMap<PointPlan, DecimationPlan>();

function decimationFor(plan: PointPlan): DecimationPlan {
  let decimation = decimations.get(plan);
  if (decimation === undefined) {
    decimation = decimationOf(plan.rateHz, plan.spectrum.factor, plan.spectrum.fmaxHz);
    decimations.set(plan, decimation);
  }
  return decimation;
}

/**
 * @param acceleration the whole record in g.
 * @param rateHz its measured rate.
 * @returns null where the record is too short for any spectrum.
 */
export function decimateRecord(
  plan: PointPlan,
  acceleration: Float64Array,
  rateHz: number,
): DecimatedRecord | null {
  const { factor, fmaxHz, blockSamples, averages, window } = plan.spectrum;
  const decimation = decimationFor(plan);
  if (decimation.outputLength(acceleration.length) < LEAST_BLOCK) return null;
  const samples = decimate(decimation, acceleration);
  const decimatedHz = rateHz / factor;
  // Too short for two blocks: then two shorter ones, half overlapped. One alone hardly hears the record's ends.
  const fits = samples.length >= 1.5 * blockSamples;
  const spectrum = averagedSpectrum(samples, {
    rateHz: decimatedHz,
    blockSamples: fits ? blockSamples : Math.floor(samples.length / 1.5),
    window,
  });
  const seconds = (acceleration.length / rateHz).toFixed(2);
  let short: string | null = null;
  if (!fits) {
    const lines = Math.floor(plan.spectrum.fmaxHz / spectrum.lineHz);
    short = `record too short: ${seconds} s give ${lines} of ${plan.spectrum.lines} lines`;
  } else if (spectrum.averages < averages) {
    short = `record too short: ${seconds} s give ${spectrum.averages} of ${averages} averages`;
  }
  return {
    samples,
    rateHz: decimatedHz,
    fmaxHz: Math.min(fmaxHz, (decimation.fmaxHz * rateHz) / plan.rateHz),
    firstAt: decimation.firstOutputAt,
    factor,
    spectrum,
    plannedLineHz: plan.spectrum.lineHz,
    shortLineHz: fits ? plan.spectrum.lineHz : spectrum.lineHz,
    short,
  };
}
