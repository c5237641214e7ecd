/**
 * Shaft speed from the lines of spectra: a comb of harmonics is laid over them at every speed that the machine can
 * have, and the speed whose comb meets most is taken, unless another does nearly as well.
 */

import { slip } from './electrical.ts';

interface SpeedLine {
  readonly hz: number;
  /** 20·log10 of its amplitude over the floor about it. */
  readonly overFloorDb: number;
}

/** The lines of one spectrum: of the acceleration, or of its squared envelope. */
export interface SpeedLines {
  readonly lines: readonly SpeedLine[];
  /** Line spacing, and the highest frequency of the spectrum, Hz. */
  readonly lineHz: number;
  readonly fmaxHz: number;
}

export interface SpeedRange {
  /** What the settings allow, Hz. */
  readonly lowHz: number;
  readonly highHz: number;
  /** Synchronous speed of a motor on mains, which it never reaches; null: no such relation. */
  readonly synchronousHz: number | null;
  /** Mains frequency: lines at it and at twice it are pickup and magnetic pull, not speed. */
  readonly mainsHz: number;
}

export type SpeedFinding =
  | { readonly hz: number; readonly confidence: number; readonly reason: null }
  | { readonly hz: null; readonly reason: string };

/** The comb reaches to this multiple of the highest speed: more harmonics smear when the speed drifts. */
const HARMONICS = 12;
/** A line this far over the floor counts nothing, or all (both of a line's height and of its certainty). */
const NOTHING_DB = 8;
const ALL_DB = 30;
/** Unbalance shows as a first harmonic alone, far over all else: it counts once more up to this height. */
const DOMINANT_DB = 60;
/** A tooth meets lines within this many line spacings. */
const TOOTH_LINES = 0.75;
/** Scores in lines of full height at the first harmonic: the least, and what leaves nothing to wish for. */
const LEAST_SCORE = 0.3;
const FULL_SCORE = 1.5;
/** A tooth meets a line that has this height; a comb that meets only multiples of one tooth counts this share. */
const MET = 0.3;
const PART_SHARE = 0.5;
/** How near the next best may come, and one that is a whole multiple or part of the best and meets some of its lines. */
const NEXT_BEST_SHARE = 0.8;
const RELATED_SHARE = 0.9;
/**
 * A first harmonic this near outside of the range, of full height and this far above the one inside, is the true speed:
 * the settings, or the sample rate, are a few percent wrong.
 */
const JUST_OUTSIDE = 0.05;
const OUTSHINES_DB = 12;
/** Even an idling motor slips by more than this (an unloaded one in the open recordings: 0.04 %). */
const LEAST_SLIP = 0.0002;

/**
 * Finds the speed of a shaft in the lines of one or more spectra of the same record.
 *
 * @param spectra whose evidence is added up.
 * @param range where to look, Hz.
 * @returns the speed and a confidence from 0 to 1 (how far it stands before the next best, and how much was met), or
 *   the reason why none can be named: nothing stands out, two speeds compete, or the only one would be synchronous.
 * @throws RangeError for a range that is not in order or not above 0.
 *
 * Valid for a speed that is steady over the record: the lines of a drifting one smear and are not met.
 * Source: own method, a harmonic comb over whitened lines with least-squares refinement; that an induction motor stays
 * below synchronous speed is common knowledge of the trade.
 *
 * Worked: lines at 24.7, 49.4 and 74.1 Hz, 30 dB over the floor, searched from 23.9 to 25.4 Hz: 24.7 Hz.
 */
export function findShaftSpeed(spectra: readonly SpeedLines[], range: SpeedRange): SpeedFinding {
  const { lowHz, highHz } = range;
  if (!(lowHz > 0 && highHz >= lowHz)) {
    throw new RangeError(`speeds are looked for from above 0 Hz upward, not from ${lowHz} to ${highHz} Hz`);
  }
  const combs = spectra.map((spectrum) => prepare(spectrum, range));
  const ranked = scores(combs, lowHz, highHz)
    .map(({ hz, score }) => ({
      hz: refine(combs, hz),
      score: isPart(combs, hz) ? score * PART_SHARE : score,
    }))
    .sort((a, b) => b.score - a.score);
  const best = ranked[0];
  if (best === undefined || best.score < LEAST_SCORE) return unknown('no line stands out where it could be');
  if (range.synchronousHz !== null && slip(range.synchronousHz, best.hz) <= LEAST_SLIP) {
    return unknown(
      `the line at ${best.hz.toFixed(2)} Hz is not below synchronous speed, ${range.synchronousHz} Hz`,
    );
  }
  if (best.hz < lowHz || best.hz > highHz) {
    return unknown(`the line at ${best.hz.toFixed(2)} Hz lies just outside of what the settings allow`);
  }
  const outside = outshining(spectra, range, best.hz);
  if (outside !== null) {
    return unknown(
      `the line at ${outside.toFixed(2)} Hz outshines ${best.hz.toFixed(2)} Hz but lies outside of what the settings allow`,
    );
  }
  const apartHz = Math.max(...spectra.map((spectrum) => spectrum.lineHz));
  const others = ranked.filter(({ hz }) => Math.abs(hz - best.hz) > apartHz);
  const next = others.find(({ hz }) => !areRelated(hz, best.hz));
  const rival = others.find(
    ({ hz, score }) => score > best.score * (areRelated(hz, best.hz) ? RELATED_SHARE : NEXT_BEST_SHARE),
  );
  if (rival !== undefined) return unknown(`${best.hz.toFixed(2)} Hz and ${rival.hz.toFixed(2)} Hz compete`);
  const nextShare = (next?.score ?? 0) / best.score;
  return { hz: best.hz, confidence: (1 - nextShare) * Math.min(1, best.score / FULL_SCORE), reason: null };
}

/** A line just outside of the range that far outshines the first harmonic found inside; null: none. */
function outshining(spectra: readonly SpeedLines[], range: SpeedRange, foundHz: number): number | null {
  const { lowHz, highHz, mainsHz } = range;
  for (const { lines, lineHz } of spectra) {
    const reachHz = TOOTH_LINES * lineHz;
    const found = lines.filter(({ hz }) => Math.abs(hz - foundHz) < reachHz);
    const leastDb = Math.max(ALL_DB, ...found.map(({ overFloorDb }) => overFloorDb + OUTSHINES_DB));
    const outside = lines.find(
      ({ hz, overFloorDb }) =>
        overFloorDb >= leastDb &&
        !isMains(hz, mainsHz, lineHz) &&
        !isHarmonic(hz, foundHz, reachHz) &&
        ((hz > highHz + reachHz && hz < highHz * (1 + JUST_OUTSIDE)) ||
          (hz < lowHz - reachHz && hz > lowHz * (1 - JUST_OUTSIDE))),
    );
    if (outside !== undefined) return outside.hz;
  }
  return null;
}

function unknown(reason: string): SpeedFinding {
  return { hz: null, reason: `speed unknown: ${reason}` };
}

function areRelated(a: number, b: number): boolean {
  const ratio = Math.max(a, b) / Math.min(a, b);
  return ratio > 1.5 && Math.abs(ratio - Math.round(ratio)) < 0.01;
}

interface Comb {
  readonly hz: Float64Array;
  readonly height: Float64Array;
  /** What a line counts beyond its height as the first harmonic, from 0 to 1. */
  readonly dominance: Float64Array;
  readonly reachHz: number;
  readonly topHz: number;
}

/** Lines that can speak for a speed, with heights from 0 to 1, by rising frequency. */
function prepare({ lines, lineHz, fmaxHz }: SpeedLines, { highHz, mainsHz }: SpeedRange): Comb {
  const usable = lines
    .filter(({ hz, overFloorDb }) => overFloorDb > NOTHING_DB && !isMains(hz, mainsHz, lineHz))
    .sort((a, b) => a.hz - b.hz);
  return {
    hz: Float64Array.from(usable, (line) => line.hz),
    height: Float64Array.from(usable, (line) => share(line.overFloorDb, NOTHING_DB, ALL_DB)),
    dominance: Float64Array.from(usable, (line) => share(line.overFloorDb, ALL_DB, DOMINANT_DB)),
    reachHz: TOOTH_LINES * lineHz,
    topHz: Math.min(fmaxHz, HARMONICS * highHz),
  };
}

/** Lines at the mains frequency and at twice it are pickup and magnetic pull. */
function isMains(hz: number, mainsHz: number, lineHz: number): boolean {
  return [1, 2].some((k) => Math.abs(hz - k * mainsHz) < lineHz);
}

/** How far a level has come from one to another, from 0 to 1. */
function share(db: number, fromDb: number, toDb: number): number {
  return Math.max(0, Math.min(1, (db - fromDb) / (toDb - fromDb)));
}

/** Local maxima of the combs' common score over the range and a little beyond, so that none is cut at its flank. */
function scores(combs: readonly Comb[], lowHz: number, highHz: number): { hz: number; score: number }[] {
  const reachHz = Math.min(...combs.map((comb) => comb.reachHz));
  const topHz = Math.max(...combs.map((comb) => comb.topHz));
  // A quarter of a tooth at the highest harmonic.
  const stepHz = (reachHz / 4) * (lowHz / topHz);
  const fromHz = Math.max(stepHz, lowHz - reachHz);
  const count = Math.ceil((highHz + reachHz - fromHz) / stepHz) + 1;
  const curve = new Float64Array(count);
  for (let i = 0; i < count; i++) {
    const hz = fromHz + i * stepHz;
    for (const comb of combs) curve[i] = curve[i]! + scoreOf(comb, hz);
  }
  const maxima: { hz: number; score: number }[] = [];
  for (let i = 1; i < count - 1; i++) {
    const score = curve[i]!;
    if (score > curve[i - 1]! && score >= curve[i + 1]!) maxima.push({ hz: fromHz + i * stepHz, score });
  }
  return maxima;
}

/** What the teeth of a comb meet; higher harmonics weigh less, so half the true speed never does as well. */
function scoreOf(comb: Comb, hz: number): number {
  let score = 0;
  let at = 0;
  for (let k = 1; k * hz <= comb.topHz; k++) {
    while (at < comb.hz.length && comb.hz[at]! < k * hz - comb.reachHz) at++;
    let best = 0;
    for (let j = at; j < comb.hz.length && comb.hz[j]! < k * hz + comb.reachHz; j++) {
      const distance = (comb.hz[j]! - k * hz) / comb.reachHz;
      const height = comb.height[j]! + (k === 1 ? comb.dominance[j]! : 0);
      best = Math.max(best, height * (1 - distance * distance));
    }
    score += best / Math.sqrt(k);
  }
  return score;
}

/** Whether a comb meets several lines, all of them multiples of one above the first: then that one turns, or strikes. */
function isPart(combs: readonly Comb[], hz: number): boolean {
  const met = combs.flatMap((comb) =>
    [...comb.hz]
      .filter(
        (lineHz, j) => lineHz <= comb.topHz && comb.height[j]! >= MET && isNear(lineHz, hz, comb.reachHz),
      )
      .map((lineHz) => Math.round(lineHz / hz)),
  );
  return met.length > 1 && met.reduce(commonDivisor) > 1;
}

function isNear(lineHz: number, hz: number, reachHz: number): boolean {
  const k = Math.round(lineHz / hz);
  return k >= 1 && Math.abs(lineHz - k * hz) < reachHz;
}

function isHarmonic(lineHz: number, hz: number, reachHz: number): boolean {
  return lineHz > 1.5 * hz && isNear(lineHz, hz, reachHz);
}

function commonDivisor(a: number, b: number): number {
  return b === 0 ? a : commonDivisor(b, a % b);
}

/** Least squares over the lines that the teeth meet, weighted by height. */
function refine(combs: readonly Comb[], startHz: number): number {
  let hz = startHz;
  for (let round = 0; round < 3; round++) {
    let moment = 0;
    let weight = 0;
    for (const comb of combs) {
      for (const [j, lineHz] of comb.hz.entries()) {
        const k = Math.round(lineHz / hz);
        if (k < 1 || lineHz > comb.topHz) continue;
        const distance = Math.abs(lineHz - k * hz) / comb.reachHz;
        if (distance >= 1) continue;
        const tooth = comb.height[j]! * (1 - distance * distance);
        moment += tooth * k * lineHz;
        weight += tooth * k * k;
      }
    }
    if (weight === 0) return startHz;
    hz = moment / weight;
  }
  return hz;
}
