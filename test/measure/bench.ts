/** Points, plans and synthesised records for the tests of this room. */

import type { Machine, MeasureSettings, Point } from '../../src/config/station.ts';
import { type PointPlan, planPoint } from '../../src/measure/plan.ts';
import type { SampleRecord } from '../../src/measure/record.ts';
import { gaussian } from '../support/seeded.ts';

/** 2⁻¹² g, as the sensor link's test vectors have it. */
export const G_PER_COUNT = 2 ** -12;
const GRAVITY = 9.80665;

export const usual: MeasureSettings = {
  everyS: 10,
  velocity: { fmaxHz: 1000, lines: 3200, averages: 4, window: 'hann' },
  bands: [
    { id: 'low', range: { hz: [2, 10] } },
    { id: 'running-speed', range: { orders: [0.8, 1.2] } },
    { id: 'harmonics', range: { orders: [1.8, 10.2] } },
  ],
  envelope: { bandHz: [500, 16000], fmaxHz: 'auto', lines: 1600, averages: 4 },
};

export interface BenchOptions {
  rateHz?: number;
  mainsHz?: number;
  point?: Partial<Point>;
  machine?: Partial<Machine>;
  measure?: Partial<MeasureSettings>;
}

function pointOf(options: BenchOptions): Point {
  return {
    id: 'motor-de-h',
    machineId: 'pump-1',
    key: 'pump-1/motor-de-h',
    link: 'node-1',
    channel: 'h',
    direction: 'horizontal',
    part: 'motor',
    end: 'de',
    at: 'bearing',
    bearings: [],
    thrust: false,
    ratio: 1,
    severity: { table: 'iso-10816-7', category: 'I', ratedKw: 45 },
    sensor: { usableHz: null, rangeG: null, mount: null },
    measure: { ...usual, ...options.measure },
    ...options.point,
  };
}

export function planOf(options: BenchOptions = {}): PointPlan {
  const point = pointOf(options);
  const machine: Machine = {
    id: 'pump-1',
    name: 'Duty pump 1',
    mounting: 'horizontal',
    shaft: { kind: 'fixed', rpm: 1480, tolerancePct: 3 },
    running: { kind: 'velocity', aboveMmS: 0.5 },
    startDelayS: 20,
    motor: { poles: null, supply: null },
    vanes: null,
    bearings: [],
    points: [point],
    ...options.machine,
  };
  return planPoint(point, machine, options.rateHz ?? 40_960, options.mainsHz ?? 50);
}

export type Tone = readonly [hz: number, amplitudeG: number, radians?: number];

export interface RecordOptions extends Partial<SampleRecord> {
  rateHz: number;
  samples: number;
  tones?: readonly Tone[];
  /** RMS of white noise; the default dithers the quantisation as any real sensor does. */
  noiseG?: number;
  seed?: number;
}

/** A record as a node would send it: acceleration in g, rounded to counts of 2⁻¹² g within 16 bits. */
export function recordOf(options: RecordOptions): SampleRecord {
  const { rateHz, samples, tones = [], noiseG = G_PER_COUNT, seed = 1, ...fields } = options;
  const random = gaussian(seed);
  const counts = new Int32Array(samples);
  for (let i = 0; i < samples; i++) {
    let g = noiseG * random();
    for (const [hz, amplitude, phase = 0] of tones) {
      g += amplitude * Math.cos((2 * Math.PI * hz * i) / rateHz + phase);
    }
    counts[i] = Math.max(-32768, Math.min(32767, Math.round(g / G_PER_COUNT)));
  }
  return {
    counts,
    firstIndex: 0,
    unit: 'g',
    unitsPerCount: G_PER_COUNT,
    countRange: [-32768, 32767],
    rate: { hz: rateHz, source: 'measured', ppm: 20 },
    tachometer: null,
    toldShaftHz: null,
    toldRunning: null,
    missingSamples: 0,
    distrust: [],
    ...fields,
  };
}

/** Amplitude in g of a tone with this RMS velocity. */
export function gOfVelocity(mmS: number, hz: number): number {
  return (mmS * Math.SQRT2 * 2 * Math.PI * hz) / (1000 * GRAVITY);
}
