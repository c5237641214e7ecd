import { describe, expect, it } from 'vitest';
import type { Bearing, MeasureSettings } from '../../src/config/station.ts';
import { measureEnvelope } from '../../src/measure/envelope.ts';
import { Random } from '../../src/simulate/random.ts';
import { Ringing } from '../../src/simulate/ringing.ts';
import { planOf, usual } from './bench.ts';

const shaftHz = 25;
// Drive-end bearing of the Case Western Reserve University bearing data center (published multiples).
const driveEnd: Bearing = {
  id: 'de',
  elements: null,
  geometry: null,
  multiples: { ftf: 0.39828, bsf: 2.35675, bpfo: 3.5848, bpfi: 5.4152 },
};
// Its fan-end bearing: twice BSF lies at 3.9874 orders, on the fourth of the shaft.
const fanEnd: Bearing = {
  id: 'fe',
  elements: null,
  geometry: null,
  multiples: { ftf: 0.3817, bsf: 1.9937, bpfo: 3.053, bpfi: 4.9469 },
};

function plan(
  rateHz: number,
  bearings: readonly Bearing[],
  more: { envelope?: Partial<MeasureSettings['envelope']>; usableHz?: [number, number] } = {},
) {
  return planOf({
    rateHz,
    point: { bearings, sensor: { usableHz: more.usableHz ?? null, rangeG: null, mount: null } },
    measure: { envelope: { ...usual.envelope, ...more.envelope } },
    machine: { shaft: { kind: 'fixed', rpm: 60 * shaftHz, tolerancePct: 3 } },
  });
}

/** (1 + m·cos 2πf_m t) times a carrier of amplitude A. */
function modulated(
  rateHz: number,
  seconds: number,
  carrierHz: number,
  modulationHz: number,
  depth: number,
  amplitude = 1,
): Float64Array {
  return Float64Array.from({ length: Math.round(rateHz * seconds) }, (_, i) => {
    const t = i / rateHz;
    return (
      amplitude *
      (1 + depth * Math.cos(2 * Math.PI * modulationHz * t)) *
      Math.cos(2 * Math.PI * carrierHz * t)
    );
  });
}

/** A structure struck at one rate, in noise. */
function impacts(
  rateHz: number,
  seconds: number,
  hz: number,
  { size = 1, noise = 0.05, seed = 1, modesHz = [3200] } = {},
): Float64Array {
  const random = new Random(seed);
  const x = Float64Array.from({ length: Math.round(rateHz * seconds) }, () => noise * random.gauss());
  const ringing = new Ringing(
    modesHz.map((mode) => ({ hz: mode, damping: 0.03, gain: 1 })),
    rateHz,
  );
  let at = 0;
  for (let t = 0.3 / hz; t * rateHz < x.length; t += (1 + 0.003 * random.gauss()) / hz) {
    const next = Math.min(x.length, Math.ceil(t * rateHz));
    ringing.render(x, at, next);
    at = next;
    ringing.strike(size, next / rateHz - t);
  }
  ringing.render(x, at, x.length);
  return x;
}

function noise(rateHz: number, seconds: number, seed = 1): Float64Array {
  const random = new Random(seed);
  return Float64Array.from({ length: Math.round(rateHz * seconds) }, () => random.gauss());
}

describe('the figures of the envelope', () => {
  const bpfoHz = 3.5848 * shaftHz;

  // Identity (trigonometry): the squared envelope of (1 + m·cos)·unit carrier is 1 + m²/2 + 2m·cos + (m²/2)·cos 2.
  it.each([0.5, 0.2, 0.9])('holds the identity of amplitude modulation at depth %f', (m) => {
    const x = modulated(20_480, 10, 4000, bpfoHz, m);
    const { reading } = measureEnvelope(plan(20_480, [driveEnd]), x, 20_480, shaftHz);
    // A record of no whole number of periods leaves up to 2m/(2π·f·T), 3e-4, in the mean.
    expect(reading?.mean).toBeCloseTo(1 + m ** 2 / 2, 3);
    expect(reading?.bpfo?.line).toBeCloseTo(2 * m, 3);
    expect(reading?.bpfo?.modulation).toBeCloseTo((2 * m) / (1 + m ** 2 / 2), 3);
    expect(reading?.bpfo?.hz).toBeCloseTo(bpfoHz, 2);
    expect(reading?.bpfo?.expected_hz).toBeCloseTo(bpfoHz, 9);
  });

  it('reads the second line of that identity, m²/2, at twice the rate', () => {
    // A bearing whose BPFI is twice the modulation: its line is the second one.
    const m = 0.5;
    const twice: Bearing = { ...driveEnd, multiples: { ftf: 0.41, bsf: 2.35, bpfo: 2.72, bpfi: 5.44 } };
    const x = modulated(20_480, 10, 4000, 2.72 * shaftHz, m);
    const { reading } = measureEnvelope(plan(20_480, [twice]), x, 20_480, shaftHz);
    expect(reading?.bpfo?.line).toBeCloseTo(1, 3);
    expect(reading?.bpfi?.line).toBeCloseTo(0.125, 3);
  });

  it('scales with the square of the signal', () => {
    const at = (amplitude: number) =>
      measureEnvelope(
        plan(20_480, [driveEnd]),
        modulated(20_480, 10, 4000, bpfoHz, 0.5, amplitude),
        20_480,
        shaftHz,
      ).reading;
    expect(at(3)!.mean! / at(1)!.mean!).toBeCloseTo(9, 9);
    expect(at(3)!.bpfo!.line! / at(1)!.bpfo!.line!).toBeCloseTo(9, 9);
    expect(at(3)!.bpfo!.modulation!).toBeCloseTo(at(1)!.bpfo!.modulation!, 9);
  });

  it('states the level over the floor as 10·log10 of line over floor, and the floor about the strongest line', () => {
    const x = impacts(20_480, 10, bpfoHz);
    const { reading } = measureEnvelope(plan(20_480, [driveEnd]), x, 20_480, shaftHz);
    const { line, over_floor_db } = reading!.bpfo!;
    expect(over_floor_db).toBeCloseTo(10 * Math.log10(line! / reading!.floor!), 9);
    expect(over_floor_db).toBeGreaterThan(10);
    expect(reading!.bpfo!.harmonics).toBeGreaterThanOrEqual(5);
  });

  it('finds a line that slips and states where', () => {
    const x = impacts(20_480, 10, bpfoHz * 1.011);
    const { reading } = measureEnvelope(plan(20_480, [driveEnd]), x, 20_480, shaftHz);
    expect(reading?.bpfo?.hz).toBeGreaterThan(bpfoHz * 1.009);
    expect(reading?.bpfo?.hz).toBeLessThan(bpfoHz * 1.013);
    expect(reading?.bpfo?.expected_hz).toBeCloseTo(bpfoHz, 9);
    expect(reading?.defect).toBe('outer');
  });

  it('has low levels and no harmonics in noise', () => {
    const { reading, why } = measureEnvelope(plan(20_480, [driveEnd]), noise(20_480, 10), 20_480, shaftHz);
    expect(reading?.defect).toBeNull();
    expect(why).toEqual([]);
    for (const line of [reading?.bpfo, reading?.bpfi, reading?.bsf, reading?.ftf]) {
      // The strongest of some dozen maxima of noise, four averages: 4.5 dB is 9 dB in 20·log10.
      expect(line?.over_floor_db).toBeLessThan(5.5);
      expect(line?.modulation).toBeLessThan(0.1);
    }
  });

  it('has the mean of noise as its power in the band', () => {
    // White noise of variance 1 at 20 480 Hz: the share of the band times 2, for an analytic signal (Parseval).
    const { reading } = measureEnvelope(plan(20_480, []), noise(20_480, 10), 20_480, null);
    const [low, high] = reading!.band_hz;
    const expected = (2 * (high - low)) / 10_240;
    // 20 s × 7500 Hz of degrees of freedom: 0.4 % standard error.
    expect(reading!.mean! / expected).toBeGreaterThan(0.985);
    expect(reading!.mean! / expected).toBeLessThan(1.015);
  });
});

describe('the band of the envelope', () => {
  it('ends where the rate and the sensor end, and the reading says so', () => {
    const read = (rateHz: number, usableHz?: [number, number]) =>
      measureEnvelope(
        plan(rateHz, [driveEnd], usableHz ? { usableHz } : {}),
        noise(rateHz, 10),
        rateHz,
        shaftHz,
      ).reading?.band_hz;
    expect(read(20_480)).toEqual([500, 8000]);
    expect(read(20_480, [2, 5000])).toEqual([500, 5000]);
  });

  it('gives nothing where the sensor ends below it', () => {
    const low = plan(20_480, [driveEnd], { usableHz: [2, 400] });
    expect(measureEnvelope(low, noise(20_480, 10), 20_480, shaftHz)).toEqual({
      reading: null,
      why: [],
      uncertain: false,
    });
    expect(low.caveats.join()).toContain('no envelope');
  });

  it('is chosen by spectral kurtosis where the settings ask for it', () => {
    const x = impacts(20_480, 10, 3.5848 * shaftHz, { size: 1, noise: 0.3, modesHz: [6200] });
    const { reading } = measureEnvelope(
      plan(20_480, [driveEnd], { envelope: { bandHz: 'auto' } }),
      x,
      20_480,
      shaftHz,
    );
    const [low, high] = reading!.band_hz;
    expect(low).toBeLessThan(6200);
    expect(high).toBeGreaterThan(6200);
    expect(high - low).toBeLessThan(3000);
    expect(reading?.defect).toBe('outer');
  });
});

describe('the part that is accused', () => {
  const rateHz = 12_800;
  const orders = { outer: 3.5848, inner: 5.4152 };

  it.each(['outer', 'inner'] as const)('is the %s race where impacts come at its rate', (part) => {
    for (let seed = 1; seed <= 5; seed++) {
      const x = impacts(rateHz, 8.2, orders[part] * shaftHz, { seed, noise: 0.1 });
      expect(measureEnvelope(plan(rateHz, [driveEnd]), x, rateHz, shaftHz).reading?.defect).toBe(part);
    }
  });

  it('is none where the speed is unknown, and no line is reported', () => {
    const x = impacts(rateHz, 8.2, orders.outer * shaftHz);
    const { reading, why, uncertain } = measureEnvelope(plan(rateHz, [driveEnd]), x, rateHz, null);
    expect(reading).toMatchObject({ defect: null, bpfo: null, bpfi: null, bsf: null, ftf: null });
    expect(reading?.mean).toBeGreaterThan(0);
    expect(why.join()).toContain('speed unknown');
    expect(uncertain).toBe(true);
  });

  it('is none where the geometry is unknown: its lines are reported as uncertain', () => {
    const unknown: Bearing = { id: 'pump-de', elements: 9, geometry: null, multiples: null };
    const thumb = plan(rateHz, [unknown]);
    const x = impacts(rateHz, 8.2, thumb.bearings[0]!.multiples!.bpfo * shaftHz);
    const { reading, why, uncertain } = measureEnvelope(thumb, x, rateHz, shaftHz);
    expect(reading?.bpfo?.over_floor_db).toBeGreaterThan(10);
    expect(reading?.defect).toBeNull();
    expect(why.join()).toContain('geometry unknown');
    expect(uncertain).toBe(true);
  });

  it('is looked for in every bearing of the point, and the reading says in which', () => {
    const both = plan(rateHz, [fanEnd, driveEnd]);
    const sound = measureEnvelope(both, noise(rateHz, 8.2), rateHz, shaftHz).reading;
    expect(sound).toMatchObject({ bearing: 'fe', defect: null });
    const x = impacts(rateHz, 8.2, orders.outer * shaftHz);
    const { reading } = measureEnvelope(both, x, rateHz, shaftHz);
    expect(reading).toMatchObject({ bearing: 'de', defect: 'outer' });
    expect(reading?.bpfo?.expected_hz).toBeCloseTo(orders.outer * shaftHz, 9);
  });

  it('is none for hum at twice mains, though a race has that rate', () => {
    // 100 Hz over 3.5848: BPFO of a shaft at 27.9 Hz.
    const x = impacts(rateHz, 8.2, 100);
    expect(measureEnvelope(plan(rateHz, [driveEnd]), x, rateHz, 100 / 3.5848).reading?.defect).toBeNull();
    const y = impacts(rateHz, 8.2, 104);
    expect(measureEnvelope(plan(rateHz, [driveEnd]), y, rateHz, 104 / 3.5848).reading?.defect).toBe('outer');
  });

  it('is none for another shaft whose speed is known', () => {
    const x = impacts(rateHz, 8.2, orders.outer * shaftHz);
    const { reading } = measureEnvelope(plan(rateHz, [driveEnd]), x, rateHz, shaftHz, [
      orders.outer * shaftHz,
    ]);
    expect(reading?.defect).toBeNull();
  });
});

describe('why a figure of the envelope is doubtful', () => {
  const rateHz = 12_800;

  it('is told where a bearing frequency lies on a multiple of the shaft: that line is null', () => {
    const { reading, why, uncertain } = measureEnvelope(
      plan(rateHz, [fanEnd]),
      noise(rateHz, 8.2),
      rateHz,
      shaftHz,
    );
    expect(reading?.bsf).toBeNull();
    expect(reading?.bpfo).not.toBeNull();
    expect(why.join()).toContain('2xBSF of fe (99.69 Hz) lies on 100 Hz');
    expect(uncertain).toBe(false);
  });

  it('is told where two bearing frequencies are too close for the lines', () => {
    const close: Bearing = { ...driveEnd, multiples: { ftf: 0.4, bsf: 2.71, bpfo: 3.6, bpfi: 5.4 } };
    const { why } = measureEnvelope(plan(rateHz, [close]), noise(rateHz, 8.2), rateHz, shaftHz);
    expect(why.join()).toContain('BPFI of de (135 Hz) and 2xBSF of de (135.5 Hz) are too close');
  });

  it('is not told where one type of bearing is fitted twice', () => {
    const twice = plan(rateHz, [driveEnd, { ...driveEnd, id: 'nde' }]);
    expect(measureEnvelope(twice, noise(rateHz, 8.2), rateHz, shaftHz).why).toEqual([]);
  });

  it('is told where a frequency lies above Fmax', () => {
    const low = plan(rateHz, [driveEnd], { envelope: { fmaxHz: 120 } });
    const { reading, why } = measureEnvelope(low, noise(rateHz, 35), rateHz, shaftHz);
    expect(reading?.bpfi).toBeNull();
    expect(why.join()).toContain("BPFI of de (135.4 Hz) lies above the envelope's Fmax");
  });

  it('is told where the record is short: wider lines, then no accusation, then no envelope', () => {
    const at = (seconds: number) =>
      measureEnvelope(plan(rateHz, [driveEnd]), impacts(rateHz, seconds, 3.5848 * shaftHz), rateHz, shaftHz);
    const full = at(8.2);
    expect(full.why).toEqual([]);
    const short = at(3);
    expect(short.reading?.defect).toBe('outer');
    expect(short.why.join()).toContain('record too short: envelope lines of');
    expect(short.uncertain).toBe(true);
    const shorter = at(1.2);
    expect(shorter.reading?.defect).toBeNull();
    expect(shorter.reading?.bpfo?.line).toBeGreaterThan(0);
    expect(shorter.why.join()).toContain('record too short to judge a bearing');
    const nothing = at(0.3);
    expect(nothing.reading).toBeNull();
    expect(nothing.why).toEqual(['record too short for an envelope']);
  });

  it('leaves nothing to say of silence', () => {
    const { reading } = measureEnvelope(
      plan(rateHz, [driveEnd]),
      new Float64Array(rateHz * 8),
      rateHz,
      shaftHz,
    );
    expect(reading).toMatchObject({ mean: 0, defect: null });
    expect(reading?.bpfo).toMatchObject({ line: null, over_floor_db: null });
  });
});
