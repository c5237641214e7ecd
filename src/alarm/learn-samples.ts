/** Samples for a baseline, collected over hours or weeks in bounded room, spread evenly over all that was seen. */

import type { LearnSample } from './baseline.ts';

export interface LearnSamples {
  /** Each so many-th sample is kept; it doubles whenever the room is full. */
  readonly stride: number;
  /** Samples offered so far. */
  readonly seen: number;
  readonly kept: readonly LearnSample[];
}

export const NO_SAMPLES: LearnSamples = { stride: 1, seen: 0, kept: [] };

/** Room for thirteen ranges of speed with thirty samples each. */
const MOST_KEPT = 400;

/**
 * Takes a sample, or passes it over. When the room is full every second one goes and the stride doubles, so that a week
 * is represented as evenly as an hour and a pump that seldom runs is not thinned at all.
 *
 * Worked: of 1000 samples each fourth is kept, 250.
 */
export function addSample(from: LearnSamples, sample: LearnSample): LearnSamples {
  const seen = from.seen + 1;
  if (from.seen % from.stride !== 0) return { ...from, seen };
  const kept = [...from.kept, sample];
  if (kept.length < MOST_KEPT) return { ...from, seen, kept };
  return { stride: 2 * from.stride, seen, kept: kept.filter((_, i) => i % 2 === 0) };
}
