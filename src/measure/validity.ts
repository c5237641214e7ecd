/** Whether the counts of a record can be measured at all. Any reason here makes every figure null. */

import { GRAVITY_M_S2 } from '../signal/integrate.ts';
import { clippedSamples } from './clipping.ts';
import type { SampleRecord } from './record.ts';

/** A stretch of equal counts this long, as a share of the record, is a dead sensor. */
const FLAT_SHARE = 0.1;

/**
 * The reasons, in words, why nothing in the record can be trusted; none where it can be measured.
 *
 * Over-range makes every figure null, a single sample as much as many: a clipped impact is a step, and a step has all
 * frequencies, so neither peak nor velocity nor envelope is what the machine did.
 *
 * @param rangeG what the sensor can bear; null: unknown.
 */
export function invalidities(record: SampleRecord, rangeG: number | null): string[] {
  const { counts, missingSamples, countRange } = record;
  const why = [...record.distrust];
  if (missingSamples > 0) why.push(`gap: ${missingSamples} samples missing`);
  if (counts.length === 0) return [...why, 'record too short: it is empty'];
  const flat = longestConstant(counts);
  if (flat === counts.length) return [...why, 'flat line: the counts never change'];
  if (flat >= FLAT_SHARE * counts.length && flat > 2) {
    why.push(`flat line: the counts stand still for ${flat} samples`);
  }
  const atLimit = countRange === null ? 0 : samplesAtLimit(counts, countRange);
  if (atLimit > 0) why.push(`over-range: ${atLimit} samples at the limit of the converter`);
  else {
    const clipped = clippedSamples(counts);
    if (clipped > 0) why.push(`over-range: ${clipped} samples clipped before the converter`);
  }
  if (rangeG !== null) {
    const beyond = samplesAtLimit(counts, [-rangeG / gPerCount(record), rangeG / gPerCount(record)]);
    if (beyond > 0) why.push(`over-range: ${beyond} samples beyond the sensor's ${rangeG} g`);
  }
  return why;
}

/** g per count of a record, whatever its unit. */
export function gPerCount({ unit, unitsPerCount }: Pick<SampleRecord, 'unit' | 'unitsPerCount'>): number {
  return unit === 'g' ? unitsPerCount : unitsPerCount / GRAVITY_M_S2;
}

function longestConstant(counts: Int32Array): number {
  let longest = 1;
  let start = 0;
  for (let i = 1; i <= counts.length; i++) {
    if (i < counts.length && counts[i] === counts[start]) continue;
    longest = Math.max(longest, i - start);
    start = i;
  }
  return longest;
}

function samplesAtLimit(counts: Int32Array, [low, high]: readonly [number, number]): number {
  let found = 0;
  for (let i = 0; i < counts.length; i++) if (counts[i]! <= low || counts[i]! >= high) found++;
  return found;
}
