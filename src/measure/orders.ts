/** The first three harmonics of the shaft: velocity, and its lag behind the tachometer. */

import { strongestBin } from '../signal/spectrum.ts';
import { makeWindow } from '../signal/window.ts';
import type { DecimatedRecord } from './decimated.ts';
import { overFloorDb } from './lines.ts';
import { ordersMerge } from './plan-notes.ts';
import type { OrderReading, Reading } from './reading.ts';
import { type TachometerSpeed, turnsAt } from './tachometer.ts';
import { lineVelocity } from './velocity.ts';

const ORDERS = [1, 2, 3] as const;
/** Below this over its floor an order may be noise, whose phase is chance. */
const STANDS_OUT_DB = 10;
const NOTHING: OrderReading = { mm_s: null, deg: null };

export const NO_ORDERS: Reading['orders'] = { '1': NOTHING, '2': NOTHING, '3': NOTHING };

/**
 * @param shaftHz speed of the shaft at the point.
 * @param tachometer on the same node, one pulse a turn of this very shaft; null: no phase.
 * @param leastHz orders below this cannot be told.
 */
export function orderFigures(
  record: DecimatedRecord,
  shaftHz: number,
  tachometer: TachometerSpeed | null,
  leastHz: number,
): Reading['orders'] {
  const orders = { ...NO_ORDERS };
  if (ordersMerge(shaftHz, record.spectrum)) return orders;
  for (const order of ORDERS) {
    const hz = order * shaftHz;
    // Where the line would not lie clear of the edge.
    if (hz < leastHz || hz + 2 * record.spectrum.lineHz > record.fmaxHz) continue;
    orders[order] = {
      mm_s: lineVelocity(record.spectrum, hz, record.spectrum.lineHz)?.mmS ?? null,
      deg: tachometer === null || !standsOut(record, hz) ? null : lagDegrees(record, order, tachometer),
    };
  }
  return orders;
}

function standsOut({ spectrum }: DecimatedRecord, hz: number): boolean {
  const bin = strongestBin(spectrum, [hz - spectrum.lineHz, hz + spectrum.lineHz]);
  return bin !== null && overFloorDb(spectrum, bin) >= STANDS_OUT_DB;
}

/**
 * How far the peak of the velocity at an order lags behind the rising edge, degrees of that order, 0 to below 360. The
 * shaft's angle comes from the pulses, so a speed that drifts does no harm.
 */
function lagDegrees(record: DecimatedRecord, order: number, tachometer: TachometerSpeed): number {
  const { samples, firstAt, factor } = record;
  const window = makeWindow('hann', samples.length);
  let re = 0;
  let im = 0;
  for (let i = 0; i < samples.length; i++) {
    const angle = 2 * Math.PI * order * turnsAt(tachometer.edges, firstAt + i * factor);
    re += window[i]! * samples[i]! * Math.cos(angle);
    im += window[i]! * samples[i]! * Math.sin(angle);
  }
  // Acceleration cos(θ − lag); velocity, its integral, lags by a quarter turn more.
  const lag = (Math.atan2(im, re) * 180) / Math.PI + 90;
  return (lag + 360) % 360;
}
