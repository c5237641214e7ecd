/** Lines of the velocity spectrum that come with the water or the supply: vane pass and twice mains. */

import { twiceMainsOffOrderHz } from '../machine/electrical.ts';
import type { DecimatedRecord } from './decimated.ts';
import type { PointPlan } from './plan.ts';
import type { Reading, ToneReading } from './reading.ts';
import { lineVelocity } from './velocity.ts';

/** Twice mains is looked for within this: grids hold their frequency to 0.2 Hz (from memory; Continental Europe). */
const TWICE_MAINS_REACH_HZ = 0.4;
/** Half width of a Hann line's main lobe: two nearer than that look like one. */
const TELL_APART_LINES = 2;

export const NO_TONES: Reading['tones'] = { vane_pass: null, twice_mains: null };

/**
 * @param shaftHz speed of the shaft at the point.
 * @returns null for a tone that is unknown, beyond Fmax, or, twice mains, as near to a multiple of a shaft of the
 *   machine as the lines cannot tell apart.
 */
export function toneFigures(plan: PointPlan, record: DecimatedRecord, shaftHz: number): Reading['tones'] {
  const { vanes, machine, mainsHz, point } = plan;
  const { lineHz } = record.spectrum;
  const reachHz = Math.max(lineHz, TWICE_MAINS_REACH_HZ);
  const clearHz = Math.max(TELL_APART_LINES * lineHz, reachHz + lineHz);
  const shafts = [shaftHz, shaftHz / point.ratio];
  const clear = shafts.every((hz) => twiceMainsOffOrderHz(mainsHz, hz) >= clearHz);
  return {
    vane_pass: vanes === null ? null : tone(record, vanes * shaftHz, lineHz),
    twice_mains: machine.motor.supply === 'mains' && clear ? tone(record, 2 * mainsHz, reachHz) : null,
  };
}

function tone(record: DecimatedRecord, hz: number, reachHz: number): ToneReading | null {
  // Where the line would not lie clear of the edge.
  if (hz + reachHz + 2 * record.spectrum.lineHz > record.fmaxHz) return null;
  const line = lineVelocity(record.spectrum, hz, reachHz);
  return line === null ? null : { hz: line.hz, mm_s: line.mmS };
}
