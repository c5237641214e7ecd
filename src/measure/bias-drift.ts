/**
 * Bias drift: the mean of the record moves, as after a shock, with a bad cable or while a sensor warms up. What moves
 * slower than the lines of a spectrum leaks into its lowest ones, and integration raises it most there.
 */

import { makeWindow } from '../signal/window.ts';
import type { DecimatedRecord } from './decimated.ts';

/** The mean is followed over stretches of an eighth of the record, but of five periods of the lowest frequency measured. */
const STRETCHES = 8;
const PERIODS = 5;
/** Fewer half-overlapped stretches than this follow nothing. */
const LEAST_STRETCHES = 3;
/**
 * Movement from which it is drift. Of the open recordings three of 44 move more than this (11 to 29 % of RMS) and the
 * others less than half as much, measured against both; a MEMS sensor's bias moves by about 1 mg a kelvin.
 */
const LEAST_G = 0.01;
const LEAST_SHARE = 0.05;
/**
 * Velocity below this is spoilt. A ramp leaks next to nothing higher up (0.0007 mm/s a g from 10 Hz, 0.56 mm/s a g from
 * 2 Hz, at 3200 lines of 1000 Hz), a step 2.6 and 47 mm/s a g (computed with numpy).
 */
export const DRIFT_SPOILS_BELOW_HZ = 10;

/**
 * How far the mean of a record moves.
 *
 * @param lowestHz lower edge of the overall velocity.
 * @param rmsG RMS acceleration of the record.
 * @returns the distance in g between the highest and lowest of the Hann-weighted means of half-overlapped stretches;
 *   null where it is too little to matter or the record too short to tell.
 */
export function biasDrift(record: DecimatedRecord, lowestHz: number, rmsG: number): number | null {
  const { samples, rateHz } = record;
  const length = Math.max(Math.ceil(samples.length / STRETCHES), Math.ceil((PERIODS * rateHz) / lowestHz));
  const hop = Math.ceil(length / 2);
  if (length + (LEAST_STRETCHES - 1) * hop > samples.length) return null;
  const window = makeWindow('hann', length);
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let from = 0; from + length <= samples.length; from += hop) {
    let sum = 0;
    for (let i = 0; i < length; i++) sum += window[i]! * samples[from + i]!;
    // A Hann window's mean is 0.5.
    const mean = sum / (0.5 * length);
    low = Math.min(low, mean);
    high = Math.max(high, mean);
  }
  const drift = high - low;
  return drift >= LEAST_G && drift >= LEAST_SHARE * rmsG ? drift : null;
}
