import { BearingDefect, type DefectSettings } from './bearing.ts';
import type { Curve } from './curve.ts';
import { ElectricalPull } from './electrical.ts';
import { CollapsingBubbles, FlowNoise } from './flow.ts';
import { type Direction, ShaftOrders, type ShaftSources } from './orders.ts';
import { Random } from './random.ts';
import { Resonance, type ResonanceSettings } from './resonance.ts';
import type { Mode } from './ringing.ts';
import { type Cell, cellSamples, Shaft, type ShaftSettings } from './shaft.ts';

export interface MachineSettings {
  readonly seed: number;
  readonly shaft: ShaftSettings;
  readonly vanes: number;
  readonly sources: ShaftSources & {
    /** Velocity RMS at twice the line frequency. */
    readonly electricalMmS?: Curve;
    readonly flowRmsG?: Curve;
    readonly cavitationG?: Curve;
  };
  readonly resonance?: ResonanceSettings;
  readonly defects?: readonly DefectSettings[];
  /** What is measured: acceleration in a direction, or a mark on the shaft, 1 while it passes and 0 otherwise. */
  readonly points: readonly (Direction | 'mark')[];
}

/** Share of a turn during which the mark is seen. */
const markWidth = 0.05;

/** How a bearing's impacts reach each direction. */
const way: Readonly<Record<Direction, number>> = { horizontal: 1, vertical: 0.8, axial: 0.5 };

/** The housing rings much alike in all directions, but nowhere the same. */
function housingModes(direction: Direction, random: Random): Mode[] {
  const near = (hz: number) => hz * (0.92 + 0.16 * random.uniform());
  return [
    { hz: near(3100), damping: 0.04, gain: 0.65 * way[direction] },
    { hz: near(6400), damping: 0.03, gain: 0.35 * way[direction] },
  ];
}

/**
 * A pump set: what its points vibrate like, in g, sample by sample without end. The same settings and rate give
 * the same samples, in whatever portions they are taken.
 */
export class SimulatedMachine {
  readonly #points: MachineSettings['points'];
  readonly #shaft: Shaft;
  /** Forces of the machine as a whole, which the structure's mode answers to. */
  readonly #forces: readonly { add(cell: Cell, out: readonly Float64Array[]): void }[];
  readonly #resonances: readonly Resonance[];
  /** Impacts, which ring in modes of their own. */
  readonly #impacts: readonly { add(cell: Cell, out: readonly Float64Array[]): void }[];
  readonly #cell: readonly Float64Array[];
  readonly #vibration: readonly Float64Array[];
  #used = cellSamples;

  constructor(settings: MachineSettings, rateHz: number) {
    const { seed, shaft, sources, vanes } = settings;
    const directions = settings.points.filter((point) => point !== 'mark');
    const stream = (label: string) => Random.stream(seed, label);
    this.#points = settings.points;
    this.#shaft = new Shaft(shaft, rateHz, stream('shaft'));
    this.#forces = [
      new ShaftOrders(sources, directions, { ratedHz: shaft.ratedRpm / 60, vanes }, stream('orders')),
      new ElectricalPull(sources.electricalMmS ?? 0, shaft.mainsHz, shaft.poles, directions),
      new FlowNoise(
        sources.flowRmsG ?? 0,
        rateHz,
        directions.map((direction, k) => stream(`flow ${k} ${direction}`)),
      ),
    ];
    const { resonance } = settings;
    this.#resonances = resonance ? directions.map(() => new Resonance(resonance, rateHz)) : [];
    const modes = directions.map((direction, k) =>
      housingModes(direction, stream(`housing ${k} ${direction}`)),
    );
    this.#impacts = [
      new CollapsingBubbles(sources.cavitationG ?? 0, vanes, directions.length, rateHz, stream('bubbles')),
      ...(settings.defects ?? []).map(
        (defect, k) => new BearingDefect(defect, modes, rateHz, stream(`defect ${k}`)),
      ),
    ];
    this.#cell = settings.points.map(() => new Float64Array(cellSamples));
    this.#vibration = this.#cell.filter((_, k) => settings.points[k] !== 'mark');
  }

  /** Writes the next n samples of each point into out[point][0..n). */
  fill(out: readonly Float64Array[], n: number): void {
    for (let done = 0; done < n; ) {
      if (this.#used === cellSamples) this.#makeCell();
      const take = Math.min(n - done, cellSamples - this.#used);
      for (let point = 0; point < this.#cell.length; point++) {
        out[point]!.set(this.#cell[point]!.subarray(this.#used, this.#used + take), done);
      }
      this.#used += take;
      done += take;
    }
  }

  #makeCell(): void {
    const cell = this.#shaft.next();
    for (const channel of this.#vibration) channel.fill(0);
    for (const force of this.#forces) force.add(cell, this.#vibration);
    for (let k = 0; k < this.#resonances.length; k++) this.#resonances[k]!.apply(this.#vibration[k]!);
    for (const impact of this.#impacts) impact.add(cell, this.#vibration);
    for (let point = 0; point < this.#points.length; point++) {
      if (this.#points[point] !== 'mark') continue;
      const mark = this.#cell[point]!;
      for (let i = 0; i < cellSamples; i++) mark[i] = cell.turns[i]! % 1 < markWidth ? 1 : 0;
    }
    this.#used = 0;
  }
}
