/** What `ask/baseline` answers: how far learning is, what it proposes, what is in force, point by point. */

import type { Baseline } from '../alarm/baseline.ts';
import { roundedFigures } from '../uplink/payload.ts';
import type { LearningRun, PointLearning } from './learning.ts';

export interface BaselineLine {
  readonly t: string;
  readonly ranges: Baseline['ranges'];
  /** What was left out, in words. */
  readonly notes: readonly string[];
}

export interface PointLine {
  /** Good readings so far; null: no learning is under way. */
  readonly readings: number | null;
  readonly proposed: BaselineLine | null;
  /** Why nothing is proposed; null: something is, or nothing was tried. */
  readonly refused: string | null;
  readonly accepted: BaselineLine | null;
}

export interface BaselineAnswer {
  readonly machine: string;
  readonly learning: { readonly since: string; readonly hours: number; readonly hours_left: number } | null;
  /** A point that does not fit into the answer has words instead. */
  readonly points: Readonly<Record<string, PointLine | string>>;
}

export function baselineAnswer(
  machine: string,
  run: LearningRun | null,
  points: Readonly<Record<string, PointLearning>>,
): BaselineAnswer & { readonly points: Readonly<Record<string, PointLine>> } {
  const learning =
    run === null
      ? null
      : { since: run.since, hours: run.hours, hours_left: Number((run.leftS / 3600).toFixed(4)) };
  const lines = Object.entries(points).map(([id, point]) => [id, pointLine(point, run !== null)]);
  return { machine, learning, points: Object.fromEntries(lines) };
}

function pointLine({ samples, proposed, accepted }: PointLearning, learning: boolean): PointLine {
  const learned = proposed?.learned ?? null;
  return {
    readings: learning ? samples.seen : null,
    proposed: learned?.ok ? baselineLine(proposed!.t, learned.baseline, learned.notes) : null,
    refused: learned && !learned.ok ? learned.reason : null,
    accepted: accepted === null ? null : baselineLine(accepted.t, accepted.baseline, []),
  };
}

function baselineLine(t: string, baseline: Baseline, notes: readonly string[]): BaselineLine {
  return { t, ranges: roundedFigures(baseline.ranges), notes };
}
