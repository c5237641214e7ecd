/** Whether the counts of a record can be measured at all, and how far. */

import { GRAVITY_M_S2 } from '../signal/integrate.ts';
import { clippedSamples } from './clipping.ts';
import type { SampleRecord } from './record.ts';

/** A stretch of equal counts this long, as a share of the record, is a dead sensor. */
const FLAT_SHARE = 0.1;

/**
 * Of a record at most this share may be over range for the rest to be told, as uncertain: a few tops of sharp impacts,
 * which change neither a velocity below 1000 Hz nor the rhythm in an envelope by much. Beyond it a clipped signal is a
 * row of steps, and a step has all frequencies. Common practice, no source.
 */
const FEW_SHARE = 0.001;

export interface Validity {
  /** The reasons, in words, why nothing in the record can be trusted; none where it can be measured. */
  readonly invalid: string[];
  /** A few samples over range: no peak, crest or kurtosis, and all else uncertain; null: none. */
  readonly overRange: string | null;
}

/**
 * Judges the counts of a record.
 *
 * @param rangeG what the sensor can bear; null: unknown.
 */
export function judgeSamples(record: SampleRecord, rangeG: number | null): Validity {
  const { counts, missingSamples } = record;
  const invalid = [...record.distrust];
  if (missingSamples > 0) invalid.push(`gap: ${missingSamples} samples missing`);
  if (counts.length === 0) {
    const why = invalid.length > 0 ? invalid : ['record too short: it is empty'];
    return { invalid: why, overRange: null };
  }
  const flat = longestConstant(counts);
  if (flat === counts.length) {
    return { invalid: [...invalid, 'flat line: the counts never change'], overRange: null };
  }
  // Zeros stand where samples are missing: they tell nothing of the sensor.
  if (missingSamples === 0 && flat >= FLAT_SHARE * counts.length && flat > 2) {
    invalid.push(`flat line: the counts stand still for ${flat} samples`);
  }
  const over = overRange(record, rangeG);
  const few = over !== null && over.samples <= FEW_SHARE * counts.length;
  if (over !== null && !few) invalid.push(over.text);
  return { invalid, overRange: few ? over.text : null };
}

function overRange(record: SampleRecord, rangeG: number | null): { samples: number; text: string } | null {
  const { counts, countRange } = record;
  const found: { samples: number; where: string }[] = [];
  const atLimit = countRange === null ? 0 : samplesAtLimit(counts, countRange);
  found.push({ samples: atLimit, where: 'at the limit of the converter' });
  if (rangeG !== null) {
    const limit = rangeG / gPerCount(record);
    found.push({
      samples: samplesAtLimit(counts, [-limit, limit]),
      where: `beyond the sensor's ${rangeG} g`,
    });
  }
  if (atLimit === 0) found.push({ samples: clippedSamples(counts), where: 'clipped before the converter' });
  const worst = found.sort((a, b) => b.samples - a.samples)[0];
  if (!worst || worst.samples === 0) return null;
  return { samples: worst.samples, text: `over-range: ${worst.samples} samples ${worst.where}` };
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
