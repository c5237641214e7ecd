/** Speed and angle from a tachometer: counts above 0 are high, pulses are at least two samples wide. */

export interface TachometerSpeed {
  /** Mean over the whole turns that the record holds. */
  readonly hz: number;
  /** Largest less smallest speed of single turns, over the mean; 0 where there is but one turn. */
  readonly spread: number;
  /** How much of the spread whole samples make by themselves, each edge being known to one. */
  readonly resolution: number;
  /** Where the pulses rise, in samples from the first. */
  readonly edges: Float64Array;
}

/** More single high samples than this share of all pulses are no glitches: pulses are too short for the rate. */
const TOO_SHORT_SHARE = 0.05;
/** The level that counts above 0 cross: whole counts above 0 are at least 1. */
const LEVEL = 0.5;

/**
 * Mean speed over a record of pulses.
 *
 * @param rateHz rate of the record.
 * @returns null where fewer than two pulses rise: then no speed can be told.
 */
export function tachometerSpeed(
  counts: Int32Array,
  pulsesPerRev: number,
  rateHz: number,
): TachometerSpeed | null {
  const { edges } = risingEdges(counts);
  if (edges.length < 2) return null;
  const turns = Math.floor((edges.length - 1) / pulsesPerRev);
  // The pulses of one turn need not be evenly spaced: whole turns, where there is one.
  const last = turns > 0 ? turns * pulsesPerRev : edges.length - 1;
  const hz = (last / pulsesPerRev) * (rateHz / (edges[last]! - edges[0]!));
  let shortest = Number.POSITIVE_INFINITY;
  let longest = 0;
  for (let i = pulsesPerRev; i < edges.length; i++) {
    const turn = edges[i]! - edges[i - pulsesPerRev]!;
    shortest = Math.min(shortest, turn);
    longest = Math.max(longest, turn);
  }
  const spread = turns > 0 ? (rateHz / shortest - rateHz / longest) / hz : 0;
  return { hz, spread, resolution: (2 * hz) / rateHz, edges };
}

/** Whether more than a few pulses last but one sample: then others fall between two, and no count of them is a speed. */
export function pulsesTooShort(counts: Int32Array): boolean {
  const { edges, single } = risingEdges(counts);
  const pulses = edges.length + single;
  return pulses > 2 && single > TOO_SHORT_SHARE * pulses;
}

/** Where the counts rise above 0, between samples; a single high sample is a glitch and no pulse. */
function risingEdges(counts: Int32Array): { edges: Float64Array; single: number } {
  const edges: number[] = [];
  let single = 0;
  for (let i = 1; i < counts.length - 1; i++) {
    const before = counts[i - 1]!;
    const here = counts[i]!;
    if (before > 0 || here <= 0) continue;
    if (counts[i + 1]! <= 0) {
      single++;
      continue;
    }
    edges.push(i - 1 + (LEVEL - before) / (here - before));
  }
  return { edges: Float64Array.from(edges), single };
}

/**
 * Angle of the shaft at a place in the record, in turns from the first rising edge of a tachometer with one pulse a
 * turn; beyond the first and last edge it goes on at the speed of the nearest turn.
 */
export function turnsAt(edges: Float64Array, sample: number): number {
  let low = 0;
  let high = edges.length - 1;
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (edges[middle]! <= sample) low = middle;
    else high = middle;
  }
  return low + (sample - edges[low]!) / (edges[high]! - edges[low]!);
}
