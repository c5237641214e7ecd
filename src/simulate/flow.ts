import { type Curve, curveAt, isAlwaysZero } from './curve.ts';
import type { Random } from './random.ts';
import { type Mode, Ringing } from './ringing.ts';
import { type Cell, cellSamples } from './shaft.ts';

/** The corner above which the noise of the flow falls off with frequency. */
const turbulenceCornerHz = 2500;

/** Broadband noise of the flow: white up to a corner, then falling; its RMS at rated speed is the figure, in g. */
export class FlowNoise {
  readonly #rmsG: Curve;
  readonly #randoms: readonly Random[];
  readonly #keep: number;
  readonly #drive: number;
  readonly #state: Float64Array;

  constructor(rmsG: Curve, rateHz: number, randoms: readonly Random[]) {
    this.#rmsG = rmsG;
    this.#randoms = randoms;
    this.#keep = Math.exp((-2 * Math.PI * turbulenceCornerHz) / rateHz);
    // A one-pole filter of unit white noise with this drive has a variance of 1.
    this.#drive = Math.sqrt(1 - this.#keep ** 2);
    this.#state = new Float64Array(randoms.length);
  }

  add(cell: Cell, out: readonly Float64Array[]): void {
    if (isAlwaysZero(this.#rmsG)) return;
    const rms = curveAt(this.#rmsG, cell.timeS) * cell.speedRatio ** 2;
    for (let channel = 0; channel < out.length; channel++) {
      const random = this.#randoms[channel]!;
      const to = out[channel]!;
      let state = this.#state[channel]!;
      for (let i = 0; i < cellSamples; i++) {
        state = this.#keep * state + this.#drive * random.gauss();
        to[i] = to[i]! + rms * state;
      }
      this.#state[channel] = state;
    }
  }
}

const collapseModes: readonly Mode[] = [
  { hz: 5600, damping: 0.08, gain: 0.7 },
  { hz: 8700, damping: 0.08, gain: 1 },
  { hz: 12400, damping: 0.08, gain: 0.8 },
];
const collapsesPerS = 3000;
/** How much more often bubbles collapse while a vane passes. */
const vaneDepth = 0.6;

/**
 * Noise as of cavitation: bubbles that collapse at random times (Poisson), more of them as each vane passes, each
 * a short ringing at high frequency of random strength. The figure is the mean strength of a collapse in g.
 */
export class CollapsingBubbles {
  readonly #meanG: Curve;
  readonly #vanes: number;
  readonly #random: Random;
  readonly #ringing: readonly Ringing[];
  /** Until the next collapse, in mean waiting times. */
  #wait: number;

  constructor(meanG: Curve, vanes: number, channels: number, rateHz: number, random: Random) {
    this.#meanG = meanG;
    this.#vanes = vanes;
    this.#random = random;
    this.#ringing = Array.from({ length: channels }, () => new Ringing(collapseModes, rateHz));
    this.#wait = random.exponential();
  }

  add(cell: Cell, out: readonly Float64Array[]): void {
    if (isAlwaysZero(this.#meanG)) return;
    const meanG = curveAt(this.#meanG, cell.timeS) * cell.speedRatio ** 2;
    let rendered = 0;
    for (let i = 0; i < cellSamples; i++) {
      const rate = collapsesPerS * (1 + vaneDepth * Math.cos(2 * Math.PI * this.#vanes * cell.turns[i]!));
      this.#wait -= rate * cell.sampleS;
      while (this.#wait <= 0) {
        this.#render(out, rendered, i);
        rendered = i;
        const agoS = Math.min(-this.#wait / rate, cell.sampleS);
        const strength = meanG * this.#random.exponential();
        for (const ringing of this.#ringing) ringing.strike(strength, agoS);
        this.#wait += this.#random.exponential();
      }
    }
    this.#render(out, rendered, cellSamples);
  }

  #render(out: readonly Float64Array[], from: number, to: number): void {
    for (let channel = 0; channel < out.length; channel++)
      this.#ringing[channel]!.render(out[channel]!, from, to);
  }
}
