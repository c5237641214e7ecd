import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import { PlanError } from '../../src/measure/plan.ts';
import { gOfVelocity, planOf, recordOf, usual } from './bench.ts';

describe('sizes of a point', () => {
  it('are the worked case: 3200 lines of 1000 Hz at 40 960 Hz', () => {
    const plan = planOf();
    expect(plan.spectrum).toMatchObject({
      factor: 16,
      rateHz: 2560,
      fmaxHz: 1000,
      lines: 3200,
      lineHz: 0.3125,
      blockSamples: 8192,
      averages: 4,
    });
    expect(plan.stepSamples).toBe(409_600);
    // 4 half-overlapped blocks of 3.2 s are 8 s: the interval of 10 s is longer.
    expect(plan.recordSamples).toBe(409_600);
  });

  it('T = lines/Fmax: 800 lines of 1 kHz take 0.8 s (seen in a textbook page)', () => {
    const velocity = { ...usual.velocity, lines: 800 };
    const { spectrum } = planOf({ measure: { velocity } });
    expect(spectrum.blockSamples / spectrum.rateHz).toBeCloseTo(0.8, 9);
  });

  it.each([
    [12_000, 4, 3000, 9600],
    [25_600, 10, 2560, 8192],
    [48_828, 18, 2712.6667, 8681],
    [102_400, 40, 2560, 8192],
    [2560, 1, 2560, 8192],
  ])('%d Hz is divided by %d', (rateHz, factor, decimatedHz, blockSamples) => {
    const { spectrum } = planOf({ rateHz });
    expect(spectrum.factor).toBe(factor);
    expect(spectrum.rateHz).toBeCloseTo(decimatedHz, 3);
    expect(spectrum.blockSamples).toBe(blockSamples);
    // What is promised: at least 2.56 × Fmax is left (common practice, no source).
    expect(spectrum.rateHz).toBeGreaterThanOrEqual(2.56 * spectrum.fmaxHz - 1e-9);
  });

  it('make a record longer than the interval where lines and averages need it', () => {
    const velocity = { ...usual.velocity, averages: 10 };
    const plan = planOf({ measure: { velocity, everyS: 10 } });
    // 3.2 s · (1 + 9/2), the filter's margins at both ends, less the one sample that ends no step.
    expect(plan.recordSamples).toBe(plan.spectrum.rawSamples);
    expect(plan.recordSamples).toBe((17.6 * 2560 - 1) * 16 + 1 + 2 * plan.spectrum.marginSamples);
    expect(plan.stepSamples).toBe(409_600);
  });

  it('make it long enough for the envelope, with what is cut at its ends', () => {
    const envelope = { ...usual.envelope, lines: 3200 };
    const plan = planOf({ measure: { envelope, everyS: 2 } });
    // fmax 500 Hz: T = 6.4 s, four half-overlapped blocks are 16 s, and 0.05 s at each end.
    expect(plan.recordSamples).toBe(Math.ceil(16.1 * 40_960));
  });
});

describe('bands of a point', () => {
  it('the overall band is 10 to 1000 Hz, from 2 Hz below 600 r/min (ISO 10816-3 Annex A)', () => {
    const at = (rpm: number) => planOf({ machine: { shaft: { kind: 'fixed', rpm, tolerancePct: 3 } } });
    expect(at(600).overallHz).toEqual([10, 1000]);
    expect(at(599).overallHz).toEqual([2, 1000]);
    expect(planOf({ machine: { shaft: null } }).overallHz).toEqual([10, 1000]);
    // Behind a gear the point's own shaft counts.
    expect(planOf({ point: { ratio: 0.25 } }).overallHz).toEqual([2, 1000]);
  });

  it('end at Fmax where that is lower, and the plan says so', () => {
    const plan = planOf({ measure: { velocity: { ...usual.velocity, fmaxHz: 500, lines: 1600 } } });
    expect(plan.overallHz).toEqual([10, 500]);
    expect(plan.warnings).toContainEqual('overall velocity ends at Fmax, 500 Hz, instead of 1000 Hz');
    expect(plan.caveats).toEqual([]);
  });

  it('cut the envelope band to rate/2.56 and to the sensor, with the reason', () => {
    const byRate = planOf({ rateHz: 12_000 });
    expect(byRate.envelope!.bandHz).toEqual([500, 4687.5]);
    expect(byRate.warnings).toContainEqual(
      'envelope band 500 to 16000 Hz is cut to 500 to 4688 Hz: a rate of 12000 Hz carries 4688 Hz',
    );
    const bySensor = planOf({ point: { sensor: { usableHz: [2, 10_000], rangeG: null, mount: 'stud' } } });
    expect(bySensor.envelope!.bandHz).toEqual([500, 10_000]);
    expect(bySensor.warnings).toContainEqual(
      'envelope band 500 to 16000 Hz is cut to 500 to 10000 Hz: the sensor is usable over 2 to 10000 Hz',
    );
    expect(bySensor.accelerationHz).toEqual([2, 10_000]);
    expect(planOf().accelerationHz).toEqual([2, 16_000]);
  });

  it('leave no envelope where the sensor cannot carry it, and make every reading say so', () => {
    const plan = planOf({ point: { sensor: { usableHz: [2, 400], rangeG: null, mount: 'probe' } } });
    expect(plan.envelope).toBeNull();
    expect(plan.caveats.join()).toMatch(/no envelope: the sensor is usable over 2 to 400 Hz/);
    expect(plan.caveats.join()).toMatch(/overall velocity wants 10 to 1000 Hz/);
  });

  it('fmax auto is the larger of 500 Hz and 3.5 × BPFI at the nominal speed', () => {
    const known = {
      elements: 9,
      geometry: { elementMm: 7.938, pitchMm: 39.04, contactDeg: 0 },
      multiples: null,
    };
    const bearings = [{ id: 'de', ...known }];
    // BPFI is 5.415 × (Case Western bearing data center, 6205): 3.5 · 5.415 · 24.67 Hz = 467.5 Hz, and twice at 2960.
    const slow = planOf({ point: { bearings } });
    const fast = planOf({
      point: { bearings },
      machine: { shaft: { kind: 'fixed', rpm: 2960, tolerancePct: 3 } },
    });
    expect(slow.envelope!.fmaxHz).toBe(500);
    expect(fast.envelope!.fmaxHz).toBeCloseTo(3.5 * 5.4152 * (2960 / 60), 0);
    expect(fast.envelope!.blockS).toBeCloseTo(1600 / fast.envelope!.fmaxHz, 9);
    expect(slow.bearings[0]!.nominalHz!.bpfo).toBeCloseTo(3.5848 * (1480 / 60), 1);
  });
});

describe('what settings ask for and cannot have', () => {
  it('an Fmax above what the rate carries is cut, and every reading is uncertain', () => {
    const plan = planOf({ rateHz: 2000 });
    expect(plan.spectrum.fmaxHz).toBe(781.25);
    expect(plan.spectrum.lineHz).toBe(0.3125);
    expect(plan.caveats).toContainEqual('Fmax 1000 Hz needs a rate of 2560 Hz; 2000 Hz carries 781.3 Hz');
  });

  it('a rate too low for any velocity, or a record too long, is refused', () => {
    expect(() => planOf({ rateHz: 20 })).toThrow(PlanError);
    expect(() => planOf({ rateHz: 0 })).toThrow(/sample rate/);
    const velocity = { ...usual.velocity, lines: 3_200_000 };
    expect(() => planOf({ measure: { velocity } })).toThrow(
      /pump-1\/motor-de-h: a record of \d+ s is too long/,
    );
  });

  it('names frequencies that the lines cannot tell apart', () => {
    const velocity = { ...usual.velocity, lines: 400 };
    const motor = { poles: 4, supply: 'mains' } as const;
    const shaft = { kind: 'fixed', rpm: 1490, tolerancePct: 3 } as const;
    // 4 × 24.83 Hz is 99.33 Hz, twice mains 100 Hz.
    expect(planOf({ measure: { velocity }, machine: { motor, shaft } }).warnings.join()).toMatch(
      /cannot tell 4x of the shaft \(99.33 Hz\) from twice mains/,
    );
    expect(planOf({ machine: { motor, shaft } }).warnings.join()).not.toMatch(/twice mains/);
  });

  it('names bearing frequencies on top of each other or of the shaft, unknown and roughly known bearings', () => {
    const multiples = { ftf: 0.4, bsf: 2.0, bpfo: 3.58, bpfi: 5.4 };
    const other = { ...multiples, bpfo: 3.6 };
    const bearings = [
      { id: 'a', elements: null, geometry: null, multiples },
      { id: 'b', elements: null, geometry: null, multiples: other },
      { id: 'c', elements: 8, geometry: null, multiples: null },
      { id: 'd', elements: null, geometry: null, multiples: null },
    ];
    const text = planOf({ point: { bearings } }).warnings.join('\n');
    expect(text).toMatch(/cannot tell BPFO of a \(88.31 Hz\) from BPFO of b \(88.8 Hz\)/);
    expect(text).toMatch(/2xBSF of a \(98.67 Hz\) lies on 4x of the shaft/);
    expect(text).toMatch(/bearing c: geometry unknown, its frequencies are rules of thumb/);
    expect(text).toMatch(/bearing d: neither geometry nor multiples nor elements are given/);
  });

  it('names what stays null without a shaft speed', () => {
    expect(planOf({ machine: { shaft: null } }).warnings).toContainEqual(
      'no shaft speed is configured: nothing for band running-speed, band harmonics',
    );
    expect(planOf().warnings).toEqual([]);
  });

  it('names a bearing line that lies on twice the mains or on another shaft, where no defect can be told', () => {
    const multiples = { ftf: 0.4, bsf: 2.2, bpfo: 100 / (1480 / 60), bpfi: 5.9 };
    const { warnings } = planOf({
      point: { bearings: [{ id: 'de', elements: 10, geometry: null, multiples }] },
    });
    expect(warnings.join('\n')).toMatch(
      /BPFO of de \(100 Hz\) lies on 100 Hz of another shaft or of twice mains/,
    );
  });

  it('tells what a range of speeds or a coarse spectrum leaves out', () => {
    const range = { kind: 'range', rpmRange: [120, 300] } as const;
    const bearing = { id: 'de', elements: 9, geometry: null, multiples: null };
    const slow = planOf({ machine: { shaft: range }, point: { bearings: [bearing] } }).warnings.join('\n');
    expect(slow).toMatch(/no bearing will be judged at 2 Hz: \d+ turns a block/);
    const coarse = planOf({ measure: { velocity: { ...usual.velocity, lines: 100 } } }).warnings.join('\n');
    expect(coarse).toMatch(/orders will be null at 23.93 Hz: lines of 10 Hz are too wide/);
    const leaky = planOf({ measure: { velocity: { ...usual.velocity, window: 'rectangular' } } });
    expect(leaky.warnings.join('\n')).toMatch(/window rectangular leaks/);
    const edge = planOf({
      machine: { shaft: { kind: 'fixed', rpm: 1470, tolerancePct: 3 } },
      measure: { velocity: { ...usual.velocity, fmaxHz: 250 } },
    }).warnings.join('\n');
    expect(edge).toMatch(/band harmonics reaches 257.4 Hz, above Fmax 250 Hz: there it will be null/);
  });

  it('names bands out of reach or narrower than the lines', () => {
    const bands = [
      { id: 'high', range: { hz: [900, 1200] } },
      { id: 'narrow', range: { orders: [0.99, 1.01] } },
      { id: 'fine', range: { orders: [0.8, 1.2] } },
    ] as const;
    const text = planOf({ measure: { bands } }).warnings.join('\n');
    expect(text).toMatch(/band high reaches 1200 Hz, above Fmax 1000 Hz/);
    expect(text).toMatch(/band narrow is 0.4933 Hz wide/);
    expect(text).not.toMatch(/band fine/);
  });

  it('names bands too low for the lines, which are null and leave the rest of a reading as good', () => {
    const velocity = { ...usual.velocity, lines: 800 };
    const plan = planOf({ measure: { velocity } });
    const text = 'band low from 2 Hz needs lines finer than 1.25 Hz: give more lines';
    expect(plan.warnings).toEqual([text]);
    const tones = [[24.7, gOfVelocity(3, 24.7)]] as const;
    const record = recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones, noiseG: 0.05 });
    const reading = measureRecord(plan, record);
    expect(reading).toMatchObject({ quality: 'good', why: [text], velocity: { low: null } });
    expect(Math.abs(reading.velocity.overall! / 3 - 1)).toBeLessThan(0.02);
    const slow = {
      measure: { velocity },
      machine: { shaft: { kind: 'fixed', rpm: 300, tolerancePct: 3 } },
    } as const;
    expect(planOf(slow).warnings).toContainEqual(
      'overall velocity from 2 Hz needs lines finer than 1.25 Hz: give more lines',
    );
  });
});
