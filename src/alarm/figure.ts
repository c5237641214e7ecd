/** A figure of a reading by its path, and whether it was measured. */

import type { Reading } from '../measure/reading.ts';
import { rounded } from '../signal/rounded.ts';

export type Figure =
  | { readonly kind: 'number'; readonly value: number; readonly unit: string }
  /** A word, as `envelope.defect`; null is an answer here: measured, and none of them. */
  | { readonly kind: 'word'; readonly value: string | null }
  | { readonly kind: 'unmeasured' };

const UNMEASURED: Figure = { kind: 'unmeasured' };

/** The figure at a path such as `velocity.overall`. A path that leads nowhere is unmeasured. Never throws. */
export function figureAt(reading: Reading, path: string): Figure {
  if (path === 'envelope.defect') return defectFigure(reading);
  let at: unknown = reading;
  let unit: unknown = '';
  for (const key of path.split('.')) {
    if (typeof at !== 'object' || at === null || !Object.hasOwn(at, key)) return UNMEASURED;
    unit = (at as Record<string, unknown>).unit ?? unit;
    at = (at as Record<string, unknown>)[key];
  }
  if (typeof at === 'string') return { kind: 'word', value: at };
  if (typeof at !== 'number' || !Number.isFinite(at)) return UNMEASURED;
  return { kind: 'number', value: at, unit: unitOf(path, String(unit)) };
}

/** A missing defect is good news only where the lines of a bearing were looked for. */
function defectFigure({ envelope, quality }: Reading): Figure {
  if (envelope === null || envelope.mean === null || quality === 'bad') return UNMEASURED;
  const looked = envelope.bpfo ?? envelope.bpfi ?? envelope.bsf ?? envelope.ftf;
  if (looked === null && envelope.defect === null) return UNMEASURED;
  return { kind: 'word', value: envelope.defect };
}

const UNIT_BY_ENDING: readonly (readonly [RegExp, string])[] = [
  [/_db$/, 'dB'],
  [/(^|[._])hz$/, 'Hz'],
  [/\.mm_s$/, 'mm/s'],
  [/\.deg$/, '°'],
  [/\.(crest|kurtosis|modulation|harmonics)$/, ''],
];

/** The unit of the group does not hold for every figure in it. */
function unitOf(path: string, groupUnit: string): string {
  return UNIT_BY_ENDING.find(([ending]) => ending.test(path))?.[1] ?? groupUnit;
}

/** A figure as it is published: four significant digits. Judged so, a value told as equal to its limit is not over it. */
export function asPublished(value: number): number {
  return rounded(value) ?? value;
}
