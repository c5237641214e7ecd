/** What a bearing measurement can be short of, through whole readings: each ends in `why`, `uncertain` or null. */
import { describe, expect, it } from 'vitest';
import type { Bearing } from '../../src/config/station.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import type { Reading } from '../../src/measure/reading.ts';
import { type BenchOptions, gOfVelocity, planOf, recordOf, type Tone } from './bench.ts';

const RATE_HZ = 12_000;
const SHAFT_HZ = 25;
// Case Western Reserve University bearing data center, drive end: published multiples.
const known: Bearing = {
  id: 'de',
  elements: null,
  geometry: null,
  multiples: { ftf: 0.39828, bsf: 2.35675, bpfo: 3.5848, bpfi: 5.4152 },
};
const like = (multiples: Partial<NonNullable<Bearing['multiples']>>): Bearing => ({
  ...known,
  multiples: { ...known.multiples!, ...multiples },
});

/** 3 mm/s at the shaft and a carrier of 2900 Hz, fully modulated at a frequency and at twice it. */
function read(
  bearing: Bearing,
  modulationHz: number,
  options: BenchOptions['point'] = {},
  seconds?: number,
): Reading {
  const plan = planOf({
    rateHz: RATE_HZ,
    point: { bearings: [bearing], ...options },
    machine: { shaft: { kind: 'fixed', rpm: 60 * SHAFT_HZ, tolerancePct: 3 } },
  });
  const tones: Tone[] = [
    [SHAFT_HZ, gOfVelocity(3, SHAFT_HZ)],
    [2900, 0.4],
    ...[-2, -1, 1, 2].map((k): Tone => [2900 + k * modulationHz, 0.3 / Math.abs(k)]),
  ];
  const samples = seconds === undefined ? plan.recordSamples : Math.round(seconds * RATE_HZ);
  return measureRecord(plan, recordOf({ rateHz: RATE_HZ, samples, tones, noiseG: 0.02 }));
}

describe('the bearing of a reading', () => {
  const bpfoHz = 3.5848 * SHAFT_HZ;

  it('is accused where nothing is short', () => {
    const reading = read(known, bpfoHz);
    expect(reading).toMatchObject({ quality: 'good', why: [] });
    expect(reading.envelope!.defect).toBe('outer');
  });

  it('is not where its geometry is unknown: the reading is uncertain', () => {
    const reading = read({ id: 'de', elements: 9, geometry: null, multiples: null }, 0.4 * 9 * SHAFT_HZ);
    expect(reading.quality).toBe('uncertain');
    expect(reading.why).toContainEqual('bearing de: geometry unknown, its lines are rules of thumb');
    expect(reading.envelope!.defect).toBeNull();
    expect(reading.envelope!.bpfo!.over_floor_db!).toBeGreaterThan(10);
  });

  it('has no line where one is expected on a multiple of the shaft, and is not accused by it', () => {
    const reading = read(like({ bpfo: 3.002 }), 3 * SHAFT_HZ);
    expect(reading.envelope!.bpfo).toBeNull();
    expect(reading.envelope!.defect).toBeNull();
    expect(reading.why.join()).toMatch(/BPFO of de \(75(\.\d+)? Hz\) lies on 75 Hz, a multiple of the shaft/);
  });

  it('says which two of its frequencies the lines cannot tell apart', () => {
    const reading = read(like({ bsf: 3.5848 / 2 + 0.002 }), bpfoHz);
    expect(reading.why.join()).toMatch(/2xBSF of de .* and BPFO of de .*|BPFO of de .* and 2xBSF of de .*/);
    expect(reading.why.join()).toMatch(/are too close for lines of/);
  });

  it('is not looked for where the sensor ends below the band: no envelope, uncertain', () => {
    const sensor = { usableHz: [2, 400], rangeG: null, mount: 'probe' } as const;
    const reading = read(known, bpfoHz, { sensor });
    expect(reading.quality).toBe('uncertain');
    expect(reading.envelope).toBeNull();
    expect(reading.why.join()).toMatch(/no envelope: the sensor is usable over 2 to 400 Hz/);
  });

  it('is not judged on a record too short for the turns that tell its lines apart', () => {
    const reading = read(known, bpfoHz, {}, 1.2);
    expect(reading.quality).toBe('uncertain');
    expect(reading.envelope!.defect).toBeNull();
    expect(reading.why.join()).toMatch(/record too short to judge a bearing/);
  });
});
