import { type Curve, curveAt } from './curve.ts';
import type { Random } from './random.ts';
import { type Cell, cellSamples } from './shaft.ts';

/**
 * Vibration locked to the shaft. Each figure is the velocity RMS at rated speed that the fault brings in its
 * strongest radial direction. Acceleration grows with speed squared: an unbalance is a force m·e·ω², an imposed
 * displacement moves with d·ω², and the pressure at the vanes follows the affinity laws, with n².
 *
 * Which orders and directions a fault shows in is common practice, no source.
 */
export interface ShaftSources {
  readonly unbalanceMmS?: Curve;
  readonly misalignmentMmS?: Curve;
  /** RMS of all its orders together. */
  readonly loosenessMmS?: Curve;
  /** What a sound machine has of 2x to 4x. */
  readonly harmonicsMmS?: Curve;
  readonly vanePassMmS?: Curve;
}

export type Direction = 'horizontal' | 'vertical' | 'axial';

interface Component {
  /** In half orders, so that subharmonics are whole. */
  readonly halves: number;
  readonly share: Readonly<Record<Direction, number>>;
  /** Lag of the acceleration's peak behind the shaft's mark. */
  readonly lagDeg: Readonly<Record<Direction, number>>;
}

const standardGravity = 9.80665;

function component(
  order: number,
  shares: readonly [number, number, number],
  lags: readonly [number, number, number],
) {
  const [horizontal, vertical, axial] = shares;
  return {
    halves: 2 * order,
    share: { horizontal, vertical, axial },
    lagDeg: { horizontal: lags[0], vertical: lags[1], axial: lags[2] },
  };
}

function loosenessComponents(random: Random): Component[] {
  const orders = Array.from({ length: 20 }, (_, k) => (k + 1) / 2);
  const size = orders.map((order) => (Number.isInteger(order) ? 1 : 0.4) / Math.sqrt(order));
  const total = Math.hypot(...size);
  return orders.map((order, k) => {
    const lag = 360 * random.uniform();
    const share = size[k]! / total;
    return component(order, [0.6 * share, share, 0.15 * share], [lag, lag + 20, lag]);
  });
}

function components(vanes: number, random: Random): Record<keyof ShaftSources, readonly Component[]> {
  return {
    // The heavy spot passes the vertical a quarter turn after the horizontal.
    unbalanceMmS: [component(1, [1, 0.85, 0.25], [30, 120, 30])],
    misalignmentMmS: [
      component(1, [0.4, 0.4, 0.7], [70, 160, 250]),
      component(2, [1, 0.9, 1.1], [10, 20, 190]),
      component(3, [0.25, 0.2, 0.35], [140, 150, 320]),
    ],
    loosenessMmS: loosenessComponents(random),
    harmonicsMmS: [
      component(2, [1, 0.8, 0.5], [40, 60, 210]),
      component(3, [0.5, 0.6, 0.3], [20, 100, 170]),
      component(4, [0.3, 0.2, 0.2], [300, 40, 90]),
    ],
    vanePassMmS: [
      component(vanes, [1, 0.8, 0.5], [0, 60, 100]),
      component(2 * vanes, [0.35, 0.3, 0.2], [90, 10, 220]),
    ],
  };
}

export class ShaftOrders {
  readonly #parts: readonly { readonly curve: Curve; readonly components: readonly Component[] }[];
  readonly #directions: readonly Direction[];
  readonly #ratedHz: number;
  readonly #highest: number;
  /** Complex acceleration amplitude in g by channel and half order. */
  readonly #re: Float64Array[];
  readonly #im: Float64Array[];

  constructor(
    sources: ShaftSources,
    directions: readonly Direction[],
    options: { readonly ratedHz: number; readonly vanes: number },
    random: Random,
  ) {
    const table = components(options.vanes, random);
    this.#parts = (Object.keys(table) as (keyof ShaftSources)[])
      .map((name) => ({ curve: sources[name] ?? 0, components: table[name] }))
      .filter(({ curve }) => curve !== 0);
    this.#directions = directions;
    this.#ratedHz = options.ratedHz;
    this.#highest = Math.max(
      0,
      ...this.#parts.flatMap((part) => part.components.map(({ halves }) => halves)),
    );
    this.#re = directions.map(() => new Float64Array(this.#highest + 1));
    this.#im = directions.map(() => new Float64Array(this.#highest + 1));
  }

  add(cell: Cell, out: readonly Float64Array[]): void {
    if (this.#highest === 0 || cell.speedRatio === 0) return;
    this.#setAmplitudes(cell);
    const highest = this.#highest;
    for (let i = 0; i < cellSamples; i++) {
      // Whole turns beyond the second are of no use to e^(i·half angle) and cost precision.
      const half = Math.PI * (cell.turns[i]! % 2);
      const c = Math.cos(half);
      const s = Math.sin(half);
      for (let channel = 0; channel < this.#re.length; channel++) {
        const re = this.#re[channel]!;
        const im = this.#im[channel]!;
        // Horner in z = e^(i·half angle): the real part of Σ A_k·z^k.
        let x = re[highest]!;
        let y = im[highest]!;
        for (let k = highest - 1; k >= 0; k--) {
          const next = x * c - y * s + re[k]!;
          y = x * s + y * c + im[k]!;
          x = next;
        }
        out[channel]![i] = out[channel]![i]! + x;
      }
    }
  }

  #setAmplitudes(cell: Cell): void {
    const speedSquared = cell.speedRatio ** 2;
    for (let channel = 0; channel < this.#directions.length; channel++) {
      this.#re[channel]!.fill(0);
      this.#im[channel]!.fill(0);
    }
    for (const part of this.#parts) {
      const mmS = curveAt(part.curve, cell.timeS);
      for (const { halves, share, lagDeg } of part.components) {
        const peakG =
          (mmS * 1e-3 * Math.SQRT2 * Math.PI * halves * this.#ratedHz * speedSquared) / standardGravity;
        for (let channel = 0; channel < this.#directions.length; channel++) {
          const direction = this.#directions[channel]!;
          const lag = (lagDeg[direction] * Math.PI) / 180;
          const re = this.#re[channel]!;
          const im = this.#im[channel]!;
          re[halves] = re[halves]! + peakG * share[direction] * Math.cos(lag);
          im[halves] = im[halves]! - peakG * share[direction] * Math.sin(lag);
        }
      }
    }
  }
}
