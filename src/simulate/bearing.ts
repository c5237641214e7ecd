import type { BearingRates } from '../machine/bearing.ts';
import { type Curve, curveAt, isAlwaysZero } from './curve.ts';
import type { Random } from './random.ts';
import { type Mode, Ringing } from './ringing.ts';
import { type Cell, cellSamples } from './shaft.ts';

export interface DefectSettings {
  readonly multiples: BearingRates;
  readonly part: 'outer' | 'inner' | 'rolling-element' | 'cage';
  /** Height of the ringing after an impact in the middle of the load zone, at rated speed; may worsen over time. */
  readonly impactG: Curve;
  /** How much slower than by rolling alone the cage turns; 1 to 2 % of slip is normal. */
  readonly slipPct?: number;
  /** Standard deviation of the interval between impacts: it adds up from one to the next. */
  readonly randomSlipPct?: number;
}

/** Half the load zone is this share of the pitch circle's radius: 0.5 is a bearing without clearance or preload. */
const loadExtent = 0.5;
const loadExponent = 1.5;
/** Spread of the strength of one impact, common practice, no source. */
const strengthSpread = 0.1;

/** Radial load over the angle from the load's direction, Stribeck's distribution for ball bearings, 1 at most. */
export function loadAt(angleRad: number): number {
  const within = 1 - (1 - Math.cos(angleRad)) / (2 * loadExtent);
  return within > 0 ? within ** loadExponent : 0;
}

/** Impacts in a turn of the shaft once the cage is `slip` (a fraction) slower than rolling makes it. */
export function slippingMultiple(
  multiples: BearingRates,
  part: DefectSettings['part'],
  slip: number,
): number {
  const elements = multiples.bpfo / multiples.ftf;
  const cage = multiples.ftf * (1 - slip);
  switch (part) {
    case 'outer':
      return elements * cage;
    case 'inner':
      return elements * (1 - cage);
    case 'rolling-element':
      // It strikes both races in each spin.
      return 2 * multiples.bsf * (1 - slip);
    case 'cage':
      return cage;
  }
}

/**
 * A bearing defect: each pass of a rolling element is an impact that makes the structure ring. The load zone
 * weights it: at the inner race as the shaft turns, at a rolling element as the cage turns; the outer race stands
 * still. Model: McFadden and Smith 1984 with the random slip of Antoni and Randall 2003 (both from memory).
 */
export class BearingDefect {
  readonly #settings: DefectSettings;
  readonly #random: Random;
  readonly #ringing: readonly Ringing[];
  readonly #intervalTurns: number;
  readonly #cageMultiple: number;
  #nextTurns: number;

  /** @param modes of the structure at each channel, with the way there in their gains. */
  constructor(settings: DefectSettings, modes: readonly (readonly Mode[])[], rateHz: number, random: Random) {
    const slip = (settings.slipPct ?? 0.8) / 100;
    this.#settings = settings;
    this.#random = random;
    this.#ringing = modes.map((channel) => new Ringing(channel, rateHz));
    this.#intervalTurns = 1 / slippingMultiple(settings.multiples, settings.part, slip);
    this.#cageMultiple = settings.multiples.ftf * (1 - slip);
    this.#nextTurns = this.#intervalTurns * random.uniform();
  }

  add(cell: Cell, out: readonly Float64Array[]): void {
    if (isAlwaysZero(this.#settings.impactG)) return;
    // The momentum that an element brings along grows with speed.
    const rated = curveAt(this.#settings.impactG, cell.timeS) * cell.speedRatio;
    const jitter = (this.#settings.randomSlipPct ?? 1) / 100;
    let rendered = 0;
    let before = cell.turns[0]!;
    for (let i = 1; i <= cellSamples; i++) {
      const turns = cell.turns[i]!;
      while (this.#nextTurns < turns) {
        // It falls between sample i−1, rendered with what came before, and sample i.
        this.#render(out, rendered, i);
        rendered = i;
        const agoS = ((turns - this.#nextTurns) / (turns - before)) * cell.sampleS;
        const strength = rated * this.#loadNow() * (1 + strengthSpread * this.#random.gauss());
        for (const ringing of this.#ringing) ringing.strike(strength, agoS);
        this.#nextTurns += this.#intervalTurns * Math.max(0.1, 1 + jitter * this.#random.gauss());
      }
      before = turns;
    }
    this.#render(out, rendered, cellSamples);
  }

  #loadNow(): number {
    switch (this.#settings.part) {
      case 'inner':
        return loadAt(2 * Math.PI * this.#nextTurns);
      case 'rolling-element':
        return loadAt(2 * Math.PI * this.#cageMultiple * this.#nextTurns);
      default:
        return 1;
    }
  }

  #render(out: readonly Float64Array[], from: number, to: number): void {
    for (let channel = 0; channel < out.length; channel++)
      this.#ringing[channel]!.render(out[channel]!, from, to);
  }
}
