import { type Curve, curveAt } from './curve.ts';
import type { Random } from './random.ts';

/**
 * Everything is made in cells of this many samples, on the absolute grid of the sample index: slow figures are
 * worked out once a cell, and asking for samples in other portions cannot change them.
 */
export const cellSamples = 64;

/** One cell as the sources of vibration see it. */
export interface Cell {
  /** Time of its first sample. */
  readonly timeS: number;
  readonly sampleS: number;
  /** Turns of the shaft since the start, at each sample and at the first of the next cell. */
  readonly turns: Float64Array;
  /** Shaft speed at the middle of the cell over the rated speed. */
  readonly speedRatio: number;
  readonly shaftHz: number;
  /** 0 to 1: whether the motor has power. */
  readonly powered: number;
}

export interface ShaftSettings {
  readonly mainsHz: number;
  readonly poles: number;
  readonly ratedRpm: number;
  /** Fraction of the rated speed; 1 if left out. A start or a coast-down is a curve. */
  readonly speed?: Curve;
  /** 0 or 1; 1 if left out. */
  readonly powered?: Curve;
  /** How far the slow drift (load, temperature) takes the speed to either side. */
  readonly driftPct?: number;
}

/** Synchronous speed 120·f/poles in r/min. */
export function synchronousRpm(mainsHz: number, poles: number): number {
  return (120 * mainsHz) / poles;
}

/** Turns a shaft: an induction motor below its synchronous speed, drifting slowly. */
export class Shaft {
  readonly #settings: ShaftSettings;
  readonly #sampleS: number;
  readonly #driftPhase: readonly [number, number];
  readonly #turns = new Float64Array(cellSamples + 1);
  #cell = 0;

  constructor(settings: ShaftSettings, rateHz: number, random: Random) {
    const synchronous = synchronousRpm(settings.mainsHz, settings.poles);
    if (!(settings.ratedRpm > 0 && settings.ratedRpm < synchronous)) {
      throw new RangeError(
        `shaft: an induction motor of ${settings.poles} poles on ${settings.mainsHz} Hz turns below ` +
          `${synchronous} r/min, not at ${settings.ratedRpm}`,
      );
    }
    this.#settings = settings;
    this.#sampleS = 1 / rateHz;
    this.#driftPhase = [2 * Math.PI * random.uniform(), 2 * Math.PI * random.uniform()];
  }

  next(): Cell {
    const cellS = cellSamples * this.#sampleS;
    const startS = this.#cell * cellS;
    const startHz = this.#hzAt(startS);
    const endHz = this.#hzAt(startS + cellS);
    const turns = this.#turns;
    let at = turns[cellSamples]!;
    const step = (endHz - startHz) / cellSamples;
    for (let i = 0; i <= cellSamples; i++) {
      turns[i] = at;
      at += (startHz + step * (i + 0.5)) * this.#sampleS;
    }
    this.#cell++;
    const shaftHz = (startHz + endHz) / 2;
    return {
      timeS: startS,
      sampleS: this.#sampleS,
      turns,
      shaftHz,
      speedRatio: (shaftHz * 60) / this.#settings.ratedRpm,
      powered: curveAt(this.#settings.powered ?? 1, startS),
    };
  }

  #hzAt(timeS: number): number {
    const { ratedRpm, speed = 1, driftPct = 0 } = this.#settings;
    const [a, b] = this.#driftPhase;
    // Two slow periods that share no short common one.
    const drift =
      0.6 * Math.sin((2 * Math.PI * timeS) / 41 + a) + 0.4 * Math.sin((2 * Math.PI * timeS) / 113 + b);
    return (ratedRpm / 60) * curveAt(speed, timeS) * (1 + (driftPct / 100) * drift);
  }
}
