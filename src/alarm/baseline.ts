/** Learned values: what the figures of a point are while the machine is well, by range of speed. */

import type { Reading } from '../measure/reading.ts';
import { figureAt } from './figure.ts';

export interface LearnedFigure {
  readonly median: number;
  /** Median absolute deviation from the median. */
  readonly mad: number;
  readonly readings: number;
}

interface BaselineRange {
  /** Shaft speeds in Hz that it was learned at; null: the speed is unknown, and so is whether it matters. */
  readonly hz: readonly [number, number] | null;
  /** By watch path. */
  readonly figures: Readonly<Record<string, LearnedFigure>>;
}

export interface Baseline {
  readonly version: 1;
  readonly ranges: readonly BaselineRange[];
}

export interface LearnSample {
  readonly shaftHz: number | null;
  readonly highZone: boolean;
  readonly figures: Readonly<Record<string, number>>;
}

export type Learned =
  | { readonly ok: true; readonly baseline: Baseline; readonly notes: readonly string[] }
  | { readonly ok: false; readonly reason: string };

/** Readings that a range needs at least. Common practice, no source: a median of 30 is steady to a fifth of the spread. */
const LEAST_READINGS = 30;
/** Share of readings in zone C or D from which the machine is not one to learn from. */
const HIGH_ZONE_SHARE = 0.1;
/** A range of speed is at most this wide: unbalance grows with speed squared, so 15 % of speed is 32 % of it. */
const RANGE_WIDTH = 1.15;
/** A range is used this far beyond the speeds that it saw. */
const RANGE_REACH = 0.03;

/** What a reading adds to learning; null: it does not count (not good, machine not known to run, nothing measured). */
export function learnSample(reading: Reading, watches: readonly string[]): LearnSample | null {
  if (reading.quality !== 'good' || reading.running !== true) return null;
  const figures: Record<string, number> = {};
  for (const watch of watches) {
    const figure = figureAt(reading, watch);
    if (figure.kind === 'number') figures[watch] = figure.value;
  }
  if (Object.keys(figures).length === 0) return null;
  const highZone = reading.zone === 'C' || reading.zone === 'D';
  return { shaftHz: reading.shaft.hz, highZone, figures };
}

/**
 * Learns a baseline from good readings of a running machine, or refuses and says why.
 *
 * Median and median absolute deviation, so that a few outliers move nothing. A range of speed with too few readings is
 * left out and noted; a machine with more than a tenth of its readings in zone C or D is refused.
 */
export function learnBaseline(samples: readonly LearnSample[]): Learned {
  if (samples.length < LEAST_READINGS) {
    return {
      ok: false,
      reason: `${samples.length} good readings while running, ${LEAST_READINGS} are needed`,
    };
  }
  const high = samples.filter((sample) => sample.highZone).length;
  if (high > HIGH_ZONE_SHARE * samples.length) {
    return {
      ok: false,
      reason: `${high} of ${samples.length} readings are in zone C or D: a baseline is learned from a machine that is well`,
    };
  }
  const ranges: BaselineRange[] = [];
  const notes: string[] = [];
  for (const group of speedGroups(samples)) {
    const figures = learnFigures(group.samples);
    if (Object.keys(figures).length > 0) ranges.push({ hz: group.hz, figures });
    else notes.push(`${describe(group.hz)}: ${group.samples.length} readings, ${LEAST_READINGS} are needed`);
  }
  if (ranges.length === 0) return { ok: false, reason: `no range of speed has enough: ${notes.join('; ')}` };
  return { ok: true, baseline: { version: 1, ranges }, notes };
}

/** The learned figure at a speed; null: nothing learned there. An unknown speed serves where one range was learned. */
export function baselineFor(baseline: Baseline, watch: string, shaftHz: number | null): LearnedFigure | null {
  const withFigure = baseline.ranges.filter((range) => Object.hasOwn(range.figures, watch));
  if (shaftHz === null) return withFigure.length === 1 ? withFigure[0]!.figures[watch]! : null;
  const distance = ({ hz }: BaselineRange) =>
    hz === null ? 0 : Math.abs(Math.log(shaftHz / Math.sqrt(hz[0] * hz[1])));
  const within = withFigure.filter(
    ({ hz }) => hz === null || (shaftHz >= hz[0] * (1 - RANGE_REACH) && shaftHz <= hz[1] * (1 + RANGE_REACH)),
  );
  const nearest = within.sort((a, b) => distance(a) - distance(b))[0];
  return nearest?.figures[watch] ?? null;
}

interface SpeedGroup {
  hz: [number, number] | null;
  samples: LearnSample[];
}

function speedGroups(samples: readonly LearnSample[]): SpeedGroup[] {
  const unknown = samples.filter((sample) => sample.shaftHz === null);
  const known = samples
    .filter((sample): sample is LearnSample & { shaftHz: number } => sample.shaftHz !== null)
    .sort((a, b) => a.shaftHz - b.shaftHz);
  const groups: SpeedGroup[] = [];
  for (const sample of known) {
    const last = groups.at(-1);
    if (last?.hz && sample.shaftHz <= last.hz[0] * RANGE_WIDTH) {
      last.hz[1] = sample.shaftHz;
      last.samples.push(sample);
    } else groups.push({ hz: [sample.shaftHz, sample.shaftHz], samples: [sample] });
  }
  // With speeds known, the readings without one could belong to any range.
  if (groups.length === 0) groups.push({ hz: null, samples: unknown });
  return groups;
}

function learnFigures(samples: readonly LearnSample[]): Record<string, LearnedFigure> {
  const figures: Record<string, LearnedFigure> = {};
  for (const watch of new Set(samples.flatMap((sample) => Object.keys(sample.figures)))) {
    const values = samples.map((sample) => sample.figures[watch]).filter((value) => value !== undefined);
    if (values.length < LEAST_READINGS) continue;
    const middle = median(values);
    const mad = median(values.map((value) => Math.abs(value - middle)));
    figures[watch] = { median: middle, mad, readings: values.length };
  }
  return figures;
}

function describe(hz: readonly [number, number] | null): string {
  return hz === null ? 'speed unknown' : `${hz[0].toFixed(1)} to ${hz[1].toFixed(1)} Hz`;
}

/** The middle of a list that is not empty. */
export function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b);
  const half = sorted.length >> 1;
  return sorted.length % 2 === 1 ? sorted[half]! : (sorted[half - 1]! + sorted[half]!) / 2;
}
