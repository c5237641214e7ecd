import { type Curve, curveAt, isAlwaysZero } from './curve.ts';
import type { Direction } from './orders.ts';
import { type Cell, cellSamples, synchronousRpm } from './shaft.ts';

const share: Readonly<Record<Direction, number>> = { horizontal: 1, vertical: 0.9, axial: 0.2 };
const standardGravity = 9.80665;
/** How deep the rotor's slip modulates the pull. */
const polePassDepth = 0.3;

/**
 * The magnetic pull at twice the line frequency, with sidebands at the pole pass frequency (poles × slip speed).
 * Gone the moment the power is. The figure is its velocity RMS, horizontally.
 */
export class ElectricalPull {
  readonly #mmS: Curve;
  readonly #mainsHz: number;
  readonly #poles: number;
  readonly #shares: readonly number[];
  #polePassTurns = 0;

  constructor(mmS: Curve, mainsHz: number, poles: number, directions: readonly Direction[]) {
    this.#mmS = mmS;
    this.#mainsHz = mainsHz;
    this.#poles = poles;
    this.#shares = directions.map((direction) => share[direction]);
  }

  add(cell: Cell, out: readonly Float64Array[]): void {
    if (isAlwaysZero(this.#mmS)) return;
    const twiceLineHz = 2 * this.#mainsHz;
    const mmS = curveAt(this.#mmS, cell.timeS) * cell.powered;
    const peakG = (mmS * 1e-3 * Math.SQRT2 * 2 * Math.PI * twiceLineHz) / standardGravity;
    const slipHz = synchronousRpm(this.#mainsHz, this.#poles) / 60 - cell.shaftHz;
    const polePassStep = this.#poles * slipHz * cell.sampleS;
    for (let i = 0; i < cellSamples; i++) {
      const lineTurns = (twiceLineHz * (cell.timeS + i * cell.sampleS)) % 1;
      const depth = 1 + polePassDepth * Math.cos(2 * Math.PI * this.#polePassTurns);
      const pull = peakG * depth * Math.cos(2 * Math.PI * lineTurns);
      this.#polePassTurns = (this.#polePassTurns + polePassStep) % 1;
      for (let channel = 0; channel < out.length; channel++) {
        out[channel]![i] = out[channel]![i]! + pull * this.#shares[channel]!;
      }
    }
  }
}
