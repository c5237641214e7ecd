/** Shaft speed from the record itself: lines of the acceleration, and where they do not settle it, of its envelope. */

import { synchronousHz } from '../machine/electrical.ts';
import {
  findShaftSpeed,
  type SpeedFinding,
  type SpeedLines,
  type SpeedRange,
} from '../machine/shaft-speed.ts';
import { chooseFactor, decimate, planDecimation } from '../signal/decimate.ts';
import { squaredEnvelope } from '../signal/envelope.ts';
import { averagedSpectrum } from '../signal/spectrum.ts';
import type { DecimatedRecord } from './decimated.ts';
import { linesOverFloor } from './lines.ts';
import { ATTENUATION_DB, type PointPlan } from './plan.ts';
import { RATE_OVER_FMAX } from './plan-notes.ts';

/** Above this the acceleration alone settles it. */
const SETTLED = 0.5;
const LEAST_LINE_DB = 8;
/** Blocks hold this many turns, whatever lines the point is measured with: as fine for a slow shaft as for a fast one. */
const BLOCK_TURNS = 80;
/** A record that is too short for that gives two half-overlapped blocks; one alone has no floor to speak of. */
const LEAST_BLOCKS = 1.5;
/** From this share of the mains frequency upward a line of a block of 80 turns may not be clear of it. */
const BESIDE_MAINS = 0.95;
/** Below this, drift of bias and leakage; no shaft that the tables know turns slower (120 r/min). */
const LEAST_HZ = 1.5;
/** An envelope shorter than this has no lines worth looking at. */
const LEAST_ENVELOPE_S = 0.5;

/** Finds the speed within what the settings of the plan allow. */
export function searchShaft(
  plan: PointPlan,
  decimated: DecimatedRecord,
  acceleration: Float64Array,
  rateHz: number,
): SpeedFinding {
  const range = rangeOf(plan);
  const fromAcceleration = speedLines(
    decimated.samples,
    decimated.rateHz,
    decimated.fmaxHz,
    plan,
    meanSquareOf(acceleration),
  );
  const first = findShaftSpeed([fromAcceleration], range);
  const bandHz = envelopeBandHz(plan, acceleration.length, rateHz);
  if ((first.hz !== null && first.confidence > SETTLED) || bandHz === null) return first;
  const fromEnvelope = envelopeLines(plan, acceleration, rateHz, bandHz, decimated.fmaxHz);
  return findShaftSpeed([fromAcceleration, fromEnvelope], range);
}

/** How far the speed in the halves of a record lies apart; null where it is not sure in both. */
export function speedDrift(
  plan: PointPlan,
  decimated: DecimatedRecord,
): { share: number; text: string } | null {
  const range = rangeOf(plan);
  const middle = decimated.samples.length >> 1;
  const [from, to] = [decimated.samples.subarray(0, middle), decimated.samples.subarray(middle)].map((half) =>
    findShaftSpeed([speedLines(half, decimated.rateHz, decimated.fmaxHz, plan, meanSquareOf(half))], range),
  );
  if (from?.hz == null || to?.hz == null || Math.min(from.confidence, to.confidence) < SETTLED) return null;
  return {
    share: Math.abs(from.hz - to.hz) / from.hz,
    text: `speed varies within the record: ${from.hz.toFixed(2)} then ${to.hz.toFixed(2)} Hz`,
  };
}

function rangeOf(plan: PointPlan): SpeedRange {
  const { poles, supply } = plan.machine.motor;
  const shaft = plan.shaft;
  if (shaft === null) throw new RangeError(`${plan.key}: no range of speed to look in`);
  return {
    lowHz: shaft.lowHz,
    highHz: shaft.highHz,
    synchronousHz:
      supply === 'mains' && poles !== null ? synchronousHz(plan.mainsHz, poles) * plan.point.ratio : null,
    mainsHz: plan.mainsHz,
  };
}

/** The band of the plan, as far as a record at this rate and of this length carries it. */
function envelopeBandHz(plan: PointPlan, samples: number, rateHz: number): [number, number] | null {
  if (plan.envelope === null || samples < LEAST_ENVELOPE_S * rateHz) return null;
  const [low, high] = plan.envelope.bandHz;
  return [low, Math.min(high, rateHz / RATE_OVER_FMAX)];
}

function envelopeLines(
  plan: PointPlan,
  acceleration: Float64Array,
  rateHz: number,
  bandHz: readonly [number, number],
  fmaxHz: number,
): SpeedLines {
  const askedHz = Math.min(fmaxHz, bandHz[1] - bandHz[0]);
  const envelope = squaredEnvelope(acceleration, { rateHz, bandHz, fmaxHz: askedHz });
  // A narrow band has a slow envelope, which may carry less than was asked.
  const topHz = Math.min(askedHz, envelope.rateHz / RATE_OVER_FMAX);
  const factor = chooseFactor(envelope.rateHz, topHz);
  const decimation = planDecimation({
    rateHz: envelope.rateHz,
    factor,
    fmaxHz: topHz,
    attenuationDb: ATTENUATION_DB,
  });
  const samples = decimate(decimation, envelope.values);
  return speedLines(samples, envelope.rateHz / factor, topHz, plan, meanSquareOf(envelope.values));
}

/** @param wholeMeanSquare of what the samples were filtered from, mean included. */
function speedLines(
  samples: Float64Array,
  rateHz: number,
  fmaxHz: number,
  plan: PointPlan,
  wholeMeanSquare: number,
): SpeedLines {
  const { lowHz, highHz, mainsHz } = rangeOf(plan);
  // A two-pole motor turns so near to the mains frequency that only the finest lines tell the two apart.
  const besideMains = highHz > BESIDE_MAINS * mainsHz && lowHz < mainsHz;
  const wanted = besideMains ? samples.length : Math.round((BLOCK_TURNS * rateHz) / lowHz);
  const blockSamples = Math.min(wanted, Math.floor(samples.length / LEAST_BLOCKS));
  const spectrum = averagedSpectrum(samples, { rateHz, blockSamples, window: 'hann' });
  return {
    lines: linesOverFloor(spectrum, [LEAST_HZ, fmaxHz], LEAST_LINE_DB, wholeMeanSquare),
    lineHz: spectrum.lineHz,
    fmaxHz,
  };
}

function meanSquareOf(samples: Float64Array): number {
  let sum = 0;
  for (let i = 0; i < samples.length; i++) sum += samples[i]! * samples[i]!;
  return sum / samples.length;
}
