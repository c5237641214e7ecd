/** Whether a figure rises over days, and how sure that is; a single step is not a rise. */

import { median } from './baseline.ts';

export interface TrendSample {
  /** Run time in days; never wall time, which may jump. */
  readonly day: number;
  readonly value: number;
}

export interface Rise {
  /** Rise over the span of the rule, in percent of the level at its start. */
  readonly pct: number;
  /** The same at the lower end of the 95 % confidence interval of the slope. */
  readonly atLeastPct: number;
  readonly levelBefore: number;
  readonly levelNow: number;
}

/** Sen's interval needs some points to be an interval. Common practice, no source. */
const LEAST_SAMPLES = 12;
/** At most so many samples: the slope takes every pair. */
const MOST_SAMPLES = 200;
/** The samples must cover this share of the span. */
const LEAST_COVER = 0.7;

/**
 * The rise of a figure over a span of days, by Theil-Sen (median of the slopes of all pairs) with Sen's confidence
 * interval.
 *
 * @param samples in order of time; those older than the span are left out; more than 200 are thinned by medians.
 * @param overDays span of the rule, days.
 * @returns null where nothing can be said, with too few samples or too short a history; `pct` 0 where one step
 *   explains the samples as well as a line does (a repair, a change of duty, a sensor moved).
 *
 * Sources: Sen, J. Am. Stat. Assoc. 63 (1968) 1379-1389; Theil 1950 (both from memory).
 * Worked: 2.0 rising by 0.1 a day over 10 days: 50 %.
 */
export function riseOver(samples: readonly TrendSample[], overDays: number): Rise | null {
  const end = samples.at(-1)?.day ?? 0;
  const within = thin(samples.filter((sample) => sample.day >= end - overDays));
  if (within.length < LEAST_SAMPLES) return null;
  if (end - within[0]!.day < LEAST_COVER * overDays) return null;
  const slopes = pairSlopes(within);
  if (slopes.length === 0) return null;
  const slope = median(slopes);
  const start = end - overDays;
  const levelAt = (day: number) => median(within.map((sample) => sample.value + slope * (day - sample.day)));
  const levelBefore = levelAt(start);
  if (!(levelBefore > 0)) return null;
  const stepped = stepMisfit(within) <= lineMisfit(within, slope);
  const pctOf = (perDay: number) => (100 * perDay * overDays) / levelBefore;
  return {
    pct: stepped ? 0 : pctOf(slope),
    atLeastPct: stepped ? 0 : pctOf(lowerSlope(slopes, within)),
    levelBefore,
    levelNow: levelAt(end),
  };
}

function pairSlopes(samples: readonly TrendSample[]): number[] {
  const slopes: number[] = [];
  for (let i = 0; i < samples.length; i++) {
    for (let j = i + 1; j < samples.length; j++) {
      const days = samples[j]!.day - samples[i]!.day;
      if (days > 0) slopes.push((samples[j]!.value - samples[i]!.value) / days);
    }
  }
  return slopes;
}

/** Lower end of Sen's two-sided 95 % interval: the slope at rank (N − 1.96·√var)/2, var = n(n−1)(2n+5)/18. */
function lowerSlope(slopes: readonly number[], samples: readonly TrendSample[]): number {
  const n = samples.length;
  const spread = 1.96 * Math.sqrt((n * (n - 1) * (2 * n + 5)) / 18);
  const rank = Math.max(0, Math.floor((slopes.length - spread) / 2));
  return [...slopes].sort((a, b) => a - b)[rank]!;
}

function lineMisfit(samples: readonly TrendSample[], slope: number): number {
  const offset = median(samples.map((sample) => sample.value - slope * sample.day));
  return samples.reduce((sum, sample) => sum + Math.abs(sample.value - slope * sample.day - offset), 0);
}

/** The best that two levels with one step between them can do, at least three samples a side. */
function stepMisfit(samples: readonly TrendSample[]): number {
  const misfit = (values: number[]) => {
    const level = median(values);
    return values.reduce((sum, value) => sum + Math.abs(value - level), 0);
  };
  const values = samples.map((sample) => sample.value);
  let best = Number.POSITIVE_INFINITY;
  for (let cut = 3; cut <= values.length - 3; cut++) {
    best = Math.min(best, misfit(values.slice(0, cut)) + misfit(values.slice(cut)));
  }
  return best;
}

/** Medians of equal runs of samples, so that at most {@link MOST_SAMPLES} are left. */
function thin(samples: readonly TrendSample[]): readonly TrendSample[] {
  const run = Math.ceil(samples.length / MOST_SAMPLES);
  if (run <= 1) return samples;
  const thinned: TrendSample[] = [];
  for (let i = 0; i < samples.length; i += run) {
    const part = samples.slice(i, i + run);
    thinned.push({
      day: median(part.map((sample) => sample.day)),
      value: median(part.map((sample) => sample.value)),
    });
  }
  return thinned;
}
