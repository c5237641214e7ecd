/**
 * How much of a set of envelope lines one hypothesis explains: a comb at multiples of one fundamental with one
 * common slip, and the sidebands that the hypothesis allows about each tooth.
 */
import type { EnvelopeLine, LineSet } from './evidence-lines.ts';

/** What a defect would show, in orders of the shaft. */
export interface Comb {
  /** The fundamental, per shaft revolution. */
  readonly fundamental: number;
  readonly teeth: number;
  /** Sideband distances on either side of each tooth, per shaft revolution, not moved by the slip. */
  readonly sidebands: readonly number[];
  /** Orders of lines that come with the comb but take no part in placing it. */
  readonly companions?: readonly number[];
  /** The slip is sought within ± this fraction. */
  readonly slip: number;
}

export interface Explanation {
  /** Σ depth² of the lines explained, each weighted by how well it sits. */
  readonly energy: number;
  /** `energy` over Σ depth² of all lines. */
  readonly share: number;
  readonly slip: number;
  /** Depth of the line at each tooth, the fundamental first; 0: none there. */
  readonly teeth: readonly number[];
  /** Depth of the strongest sideband. */
  readonly side: number;
}

const slipStep = 0.0005;

/** Index of the first line at or above `hz`. */
function firstFrom(lines: readonly EnvelopeLine[], hz: number): number {
  let low = 0;
  let high = lines.length;
  while (low < high) {
    const middle = (low + high) >> 1;
    if (lines[middle]!.hz < hz) low = middle + 1;
    else high = middle;
  }
  return low;
}

/**
 * Explains lines by a comb, at the slip that explains most.
 *
 * @param set lines that nothing else explains (depths as fractions of the envelope's mean)
 * @param comb the hypothesis, in orders
 * @param shaftHz shaft speed in hertz, above 0
 * @returns energy, share, slip, teeth and strongest sideband; all 0 where there are no lines
 * Valid for any line set; a line counts once, at the place where it sits best. A line at distance d of a place counts
 *   while d < 0.75/T, with weight 1 − 0.25·(d·T/0.75)². The slip maximises energy plus 2·Σ teeth², so that the comb
 *   itself and not its sidebands decides where it sits.
 * Source: our own; the sets of lines expected are those of McFadden and Smith 1984 and Randall and Antoni 2011 (from memory).
 * Worked: lines 107.6 Hz (depth 0.8) and 215.2 Hz (0.6), 1/T 0.4 Hz, shaft 30 Hz, comb at 3.585: share 1, slip 0.0005.
 */
export function explain(set: LineSet, comb: Comb, shaftHz: number): Explanation {
  const { lines } = set;
  const total = lines.reduce((sum, line) => sum + line.depth ** 2, 0);
  const none = { energy: 0, share: 0, slip: 0, teeth: new Array<number>(comb.teeth).fill(0), side: 0 };
  if (total === 0) return none;

  const tolerance = 0.75 * set.resolutionHz;
  const weight = new Float64Array(lines.length);
  let best: Explanation = none;
  let bestMerit = 0;
  const steps = Math.round(comb.slip / slipStep);
  for (let step = -steps; step <= steps; step++) {
    const slip = step * slipStep;
    weight.fill(0);
    const strongestAt = (hz: number): number => {
      let depth = 0;
      for (let i = firstFrom(lines, hz - tolerance); i < lines.length; i++) {
        const line = lines[i]!;
        const distance = Math.abs(line.hz - hz);
        if (distance >= tolerance) break;
        depth = Math.max(depth, line.depth);
        weight[i] = Math.max(weight[i]!, 1 - 0.25 * (distance / tolerance) ** 2);
      }
      return depth;
    };
    const teeth: number[] = [];
    let side = 0;
    for (let tooth = 1; tooth <= comb.teeth; tooth++) {
      const order = tooth * comb.fundamental * (1 + slip);
      teeth.push(strongestAt(order * shaftHz));
      for (const offset of comb.sidebands) {
        side = Math.max(
          side,
          strongestAt((order - offset) * shaftHz),
          strongestAt((order + offset) * shaftHz),
        );
      }
    }
    for (const order of comb.companions ?? []) strongestAt(order * shaftHz);
    let energy = 0;
    for (let i = 0; i < lines.length; i++) energy += weight[i]! * lines[i]!.depth ** 2;
    const merit = energy + 2 * teeth.slice(0, 3).reduce((sum, depth) => sum + depth ** 2, 0);
    if (merit > bestMerit) {
      bestMerit = merit;
      best = { energy, share: energy / total, slip, teeth, side };
    }
  }
  return best;
}
