import { Random } from './random.ts';

/** What a node can send: counts of all channels, interleaved, as its converter takes them. */
export interface SampleSource {
  /** What the node says its rate is. */
  readonly nominalRateHz: number;
  /** What its clock makes of it. */
  readonly rateHz: number;
  readonly bits: 16 | 24;
  readonly channels: readonly ChannelSettings[];
  /** Samples at the converter's limit so far. */
  readonly overRange: number;
  /** Writes the next n samples of every channel, interleaved; n × channels counts. */
  fill(counts: Int32Array, n: number): void;
}

export interface ChannelSettings {
  readonly name: string;
  readonly unit: 'g' | 'm/s2' | 'logic';
  readonly unitsPerCount: number;
  /** Density of the sensor's own noise. */
  readonly noiseGPerRtHz?: number;
}

export interface ConverterSettings {
  readonly seed: number;
  readonly nominalRateHz: number;
  /** How wrong the RC clock is: a node that claims 10 kHz with 20 000 ppm samples at 10.2 kHz. */
  readonly clockErrorPpm?: number;
  readonly bits: 16 | 24;
  readonly channels: readonly ChannelSettings[];
}

/** Where the samples come from, in g; a SimulatedMachine is one. */
export interface Vibration {
  fill(out: readonly Float64Array[], n: number): void;
}

const unitsPerG: Readonly<Record<ChannelSettings['unit'], number>> = { g: 1, 'm/s2': 9.80665, logic: 1 };
const portion = 256;

/** An accelerometer on each channel and a converter that samples them at once: noise, rounding, limits, clock. */
export class Converter implements SampleSource {
  readonly nominalRateHz: number;
  readonly rateHz: number;
  readonly bits: 16 | 24;
  readonly channels: readonly ChannelSettings[];
  #overRange = 0;
  readonly #vibration: Vibration;
  readonly #randoms: readonly Random[];
  /** RMS of the noise, in g. */
  readonly #noiseG: readonly number[];
  readonly #countsPerG: readonly number[];
  readonly #scratch: readonly Float64Array[];

  /** @param machine makes the vibration at the true rate that it is given. */
  constructor(settings: ConverterSettings, machine: (rateHz: number) => Vibration) {
    this.nominalRateHz = settings.nominalRateHz;
    this.rateHz = settings.nominalRateHz * (1 + (settings.clockErrorPpm ?? 0) * 1e-6);
    this.bits = settings.bits;
    this.channels = settings.channels;
    this.#vibration = machine(this.rateHz);
    this.#randoms = settings.channels.map(({ name }, k) =>
      Random.stream(settings.seed, `sensor ${k} ${name}`),
    );
    this.#noiseG = settings.channels.map(
      ({ noiseGPerRtHz = 0 }) => noiseGPerRtHz * Math.sqrt(this.rateHz / 2),
    );
    this.#countsPerG = settings.channels.map(({ unit, unitsPerCount }) => unitsPerG[unit] / unitsPerCount);
    this.#scratch = settings.channels.map(() => new Float64Array(portion));
  }

  get overRange(): number {
    return this.#overRange;
  }

  fill(counts: Int32Array, n: number): void {
    const width = this.channels.length;
    const most = 2 ** (this.bits - 1) - 1;
    const least = -most - 1;
    for (let done = 0; done < n; done += portion) {
      const take = Math.min(portion, n - done);
      this.#vibration.fill(this.#scratch, take);
      for (let channel = 0; channel < width; channel++) {
        const from = this.#scratch[channel]!;
        const random = this.#randoms[channel]!;
        const noiseG = this.#noiseG[channel]!;
        const perG = this.#countsPerG[channel]!;
        for (let i = 0, to = done * width + channel; i < take; i++, to += width) {
          const noise = noiseG > 0 ? noiseG * random.gauss() : 0;
          let count = Math.round((from[i]! + noise) * perG);
          if (count >= most || count <= least) {
            count = count > 0 ? most : least;
            this.#overRange++;
          }
          counts[to] = count;
        }
      }
    }
  }
}
