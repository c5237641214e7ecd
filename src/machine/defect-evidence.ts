/**
 * Which part of a rolling bearing the envelope lines accuse, if any: a joint explanation of all lines, not a level
 * over a floor. On a strongly modulated machine every frequency catches something; a defect explains most of it.
 */
import type { BearingRates } from './bearing.ts';
import type { BandLines, EnvelopeLine, LineSet } from './evidence-lines.ts';
import { type Comb, type Explanation, explain } from './line-explanation.ts';

type BearingPart = 'outer' | 'inner' | 'rolling-element' | 'cage' | 'cage-rate';

/** One part accused by one band. */
export interface Accusation {
  readonly part: BearingPart;
  /** √energy × share: how deep the modulation is, times how much of all of it the part explains. */
  readonly score: number;
  readonly bandHz: readonly [number, number];
  readonly explanation: Explanation;
}

/** Slip and a contact angle that the load changes: 1 to 2 % is normal (Smith and Randall 2015, MSSP 64-65, p. 102). */
const RACE_SLIP = 0.015;
/** A change of contact angle moves the spin of an element several times as far as the cage (kinematics). */
const ELEMENT_SLIP = 0.025;

/**
 * Depth of the fundamental from which a part can be named. On 44 recordings, combs of a race up to 0.47 deep belonged to
 * another fault more often than not and all from 0.62 but one to their own; what is shallower is left to levels and
 * trends. The spin of an element smears its line.
 */
const LEAST_DEPTH = { race: 0.55, cage: 0.45, element: 0.35 } as const;
/** Part of all modulation that the part must explain; what an element shows is less of a comb, so it must be more. */
const LEAST_SHARE = { race: 0.25, cage: 0.5, elementWithHarmonic: 0.5, elementWithSideband: 0.7 } as const;
/**
 * A defect that a turn of the load makes stronger and weaker weights its impacts by what is never negative, and then no
 * sideband exceeds its tooth; 0.9 leaves room for noise. A stronger sideband means that the true tooth is the sideband.
 */
const TOOTH_OVER_SIDEBAND = 0.9;
/** So much more must another explanation explain before it takes the lines away. */
const BETTER = 1.3;
/** The best part must lead the next by this much over all bands. */
const LEAD = 1.5;
/** Broken cages strike with many harmonics; from here on the fourth is there. */
const FOURTH_OVER_FIRST = 0.3;
/** Fundamentals of unknown sources are sought among this many of the strongest lines. */
const RIVALS = 6;

/**
 * Judges one bearing by the lines of all bands.
 *
 * @param bands lines of several bands, cleared of known sources
 * @param rates of the bearing, per shaft revolution, from its geometry and not from rules of thumb
 * @param shaftHz shaft speed in hertz
 * @returns the accusation, or null where none is deep enough, complete enough and clearly better than the next
 * Valid with lines at most 1/20 of an order apart; wider ones cannot keep a cage and the multiples of the shaft apart.
 * Source: lines expected by McFadden and Smith 1984 and Randall and Antoni 2011 (from memory); the rule is our own, its
 *   thresholds lie on a plateau of the open recordings of Case Western Reserve University and MFPT.
 * Worked: shaft 30 Hz, BPFO 3.585: lines 107.6 Hz (depth 0.8) and 215.2 Hz (0.6) and nothing else: outer, score 1.0.
 */
export function judgeBearing(
  bands: readonly BandLines[],
  rates: BearingRates,
  shaftHz: number,
): Accusation | null {
  const accusations = bands
    .flatMap((band) => accusationsOf(band, rates, shaftHz))
    .sort((a, b) => b.score - a.score);
  const best = accusations[0];
  if (best === undefined) return null;
  const next = accusations.find(({ part }) => part !== best.part);
  return next === undefined || best.score >= LEAD * next.score ? best : null;
}

/** Every part that one band accuses. */
function accusationsOf(
  { bandHz, fine, coarse }: BandLines,
  rates: BearingRates,
  shaftHz: number,
): Accusation[] {
  const { ftf, bsf, bpfo, bpfi } = rates;
  const outer = race(bpfo);
  const inner = race(bpfi);
  const element: Comb = {
    fundamental: 2 * bsf,
    teeth: 3,
    sidebands: [ftf, 2 * ftf, 1 - ftf],
    // A defective element comes round with the cage, in the load zone and past the shaft's weight.
    companions: [ftf, 2 * ftf, 3 * ftf, 1 - ftf, 1 + ftf, 1 + 2 * ftf],
    slip: ELEMENT_SLIP,
  };
  const cage: Comb = {
    fundamental: ftf,
    // Fewer than a bearing has elements: the n-th multiple of the cage is BPFO.
    teeth: 6,
    sidebands: [],
    companions: [1 - ftf, 1 + ftf, 1 - 2 * ftf, 1 + 2 * ftf],
    slip: RACE_SLIP,
  };

  const found: Accusation[] = [];
  const accuse = (part: BearingPart, set: LineSet, comb: Comb, explanation: Explanation): void => {
    const foundHz = comb.fundamental * (1 + explanation.slip) * shaftHz;
    if (rivalEnergy(set, foundHz, rates, shaftHz) > BETTER * explanation.energy) return;
    found.push({ part, score: Math.sqrt(explanation.energy) * explanation.share, bandHz, explanation });
  };

  for (const [part, comb] of [
    ['outer', outer],
    ['inner', inner],
  ] as const) {
    const e = explain(fine, comb, shaftHz);
    if (e.teeth[0]! < LEAST_DEPTH.race || !hasHarmonic(e) || e.share < LEAST_SHARE.race) continue;
    if (e.teeth[0]! >= TOOTH_OVER_SIDEBAND * e.side) accuse(part, fine, comb, e);
  }

  const byCage = explain(fine, cage, shaftHz);
  const [c1 = 0, c2 = 0, c3 = 0, c4 = 0] = byCage.teeth;
  if (c1 >= LEAST_DEPTH.cage && hasHarmonic(byCage) && byCage.share >= LEAST_SHARE.cage) {
    // A defective element brings the cage's rate too, but not its whole comb.
    accuse(c2 > 0 && c3 > 0 && c4 >= FOURTH_OVER_FIRST * c1 ? 'cage' : 'cage-rate', fine, cage, byCage);
  }

  const byElement = explain(coarse, element, shaftHz);
  if (isElement(byElement, coarse, element, [outer, inner], shaftHz))
    accuse('rolling-element', coarse, element, byElement);
  return found;
}

function race(fundamental: number): Comb {
  return { fundamental, teeth: 3, sidebands: [1, 2], slip: RACE_SLIP };
}

function hasHarmonic({ teeth }: Explanation): boolean {
  return teeth[1]! > 0 || teeth[2]! > 0;
}

function isElement(
  e: Explanation,
  set: LineSet,
  comb: Comb,
  races: readonly Comb[],
  shaftHz: number,
): boolean {
  if (e.teeth[0]! < LEAST_DEPTH.element || e.teeth[0]! < TOOTH_OVER_SIDEBAND * e.side) return false;
  const complete =
    (hasHarmonic(e) && e.share >= LEAST_SHARE.elementWithHarmonic) ||
    (e.side > 0 && e.share >= LEAST_SHARE.elementWithSideband);
  if (!complete) return false;
  // Its sidebands are the cage's: where the shaft's explain more, something else turns at this rate.
  const shafts: Comb = {
    fundamental: comb.fundamental * (1 + e.slip),
    teeth: comb.teeth,
    sidebands: [1, 2],
    slip: 0,
  };
  if (explain(set, shafts, shaftHz).energy > BETTER * e.energy) return false;
  return races.every((comb) => {
    const byRace = explain(set, comb, shaftHz);
    return byRace.teeth[0] === 0 || e.energy >= BETTER * byRace.energy;
  });
}

/**
 * Energy that the best comb of an unknown source explains, with the sidebands of the shaft: one of the strongest lines is
 * its fundamental, and none of the bearing's rates lies there. It finds the gear or belt whose second multiple looks
 * like a race.
 */
function rivalEnergy(set: LineSet, accusedHz: number, rates: BearingRates, shaftHz: number): number {
  const toleranceHz = 0.75 * set.resolutionHz;
  const strongest: EnvelopeLine[] = [...set.lines].sort((a, b) => b.depth - a.depth).slice(0, RIVALS);
  let most = 0;
  for (const { hz } of strongest) {
    if (Math.abs(hz - accusedHz) < toleranceHz || isOwn(hz, rates, shaftHz, toleranceHz)) continue;
    const e = explain(set, { fundamental: hz / shaftHz, teeth: 6, sidebands: [1, 2], slip: 0 }, shaftHz);
    if (e.teeth[0]! >= TOOTH_OVER_SIDEBAND * e.side) most = Math.max(most, e.energy);
  }
  return most;
}

function isOwn(
  hz: number,
  { ftf, bsf, bpfo, bpfi }: BearingRates,
  shaftHz: number,
  toleranceHz: number,
): boolean {
  const near = (order: number, slip: number): boolean =>
    Math.abs(hz - order * shaftHz) < slip * order * shaftHz + toleranceHz;
  return (
    near(bpfo, RACE_SLIP) || near(bpfi, RACE_SLIP) || near(ftf, RACE_SLIP) || near(2 * bsf, ELEMENT_SLIP)
  );
}
