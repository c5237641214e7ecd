import { describe, expect, it } from 'vitest';
import { decimateRecord } from '../../src/measure/decimated.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import { lineAmplitudes } from '../../src/signal/spectrum.ts';
import { G_PER_COUNT, gOfVelocity, planOf, recordOf, usual } from './bench.ts';

describe('velocity of a tone, at rates that are and are not multiples of 2.56·Fmax', () => {
  it.each([40_960, 12_000, 25_600, 48_828])(
    '25 Hz at 10 mm/s RMS is read within 0.3 %% at %d Hz',
    (rateHz) => {
      const plan = planOf({ rateHz, machine: { shaft: { kind: 'fixed', rpm: 1480, tolerancePct: 3 } } });
      const record = recordOf({ rateHz, samples: plan.recordSamples, tones: [[25, gOfVelocity(10, 25)]] });
      const reading = measureRecord(plan, record);
      expect(reading.quality).toBe('good');
      expect(Math.abs(reading.velocity.overall! / 10 - 1)).toBeLessThan(0.003);
      expect(Math.abs((reading.velocity['running-speed'] as number) / 10 - 1)).toBeLessThan(0.003);
      expect(Math.abs(reading.orders['1'].mm_s! / 10 - 1)).toBeLessThan(0.003);
      expect(reading.velocity.low).toBeLessThan(0.1);
      expect(reading.velocity.harmonics).toBeLessThan(0.1);
      expect(Math.abs(reading.shaft.hz! - 25)).toBeLessThan(25 * 0.0005);
      expect(reading.zone).toBe('D');
    },
  );

  it.each([12_000, 40_960])(
    '10 Hz at 1 g peak is 110.3636 mm/s RMS and 4968.107 µm peak to peak at %d Hz',
    (rateHz) => {
      // Kinematics with g = 9.80665 m/s². 10 Hz is the edge of the band.
      const plan = planOf({ rateHz });
      const record = recordOf({ rateHz, samples: plan.recordSamples, tones: [[10, 1]] });
      const reading = measureRecord(plan, record);
      expect(Math.abs(reading.velocity.overall! / 110.363587523 - 1)).toBeLessThan(0.003);
      expect(Math.abs(reading.displacement.p2p! / 4968.106928 - 1)).toBeLessThan(0.005);
      expect(Math.abs(reading.displacement.rms! / (4968.106928 / 2 / Math.SQRT2) - 1)).toBeLessThan(0.003);
      expect(Math.abs(reading.acceleration.rms! / Math.SQRT1_2 - 1)).toBeLessThan(0.001);
    },
  );

  it.each([
    [400, 0.002],
    [200, 0.036],
  ])('a tone on the lower edge is read whole, but for the widest lines allowed: %d lines', (lines, share) => {
    const plan = planOf({ measure: { velocity: { ...usual.velocity, lines } } });
    const tones = [[10, gOfVelocity(10, 10)]] as const;
    const { velocity } = measureRecord(
      plan,
      recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones }),
    );
    expect(velocity.overall! / 10).toBeGreaterThan(1 - share);
    expect(velocity.overall! / 10).toBeLessThan(1.0013);
  });

  it('159.154943 Hz at 10 m/s² is 10 mm/s and 10 µm RMS (hand-held calibrators, common practice)', () => {
    const plan = planOf();
    const tones = [[159.154943, (10 * Math.SQRT2) / 9.80665]] as const;
    const reading = measureRecord(plan, recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones }));
    expect(Math.abs(reading.velocity.overall! / 10 - 1)).toBeLessThan(0.003);
    expect(Math.abs(reading.displacement.rms! / 10 - 1)).toBeLessThan(0.003);
  });

  it('reads m/s² as it reads g', () => {
    const plan = planOf();
    const record = recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones: [[25, 0.2]] });
    const inG = measureRecord(plan, record);
    const inSi = measureRecord(plan, { ...record, unit: 'm/s2', unitsPerCount: G_PER_COUNT * 9.80665 });
    expect(inSi.velocity.overall).toBeCloseTo(inG.velocity.overall!, 9);
    expect(inSi.acceleration.rms).toBeCloseTo(inG.acceleration.rms!, 12);
  });
});

describe('the rate is the measured one', () => {
  it('names lines and velocity right at a node whose clock is 3 % slow', () => {
    const plan = planOf();
    const rateHz = 40_960 * 0.97;
    const tones = [
      [24.7, gOfVelocity(4, 24.7)],
      [985, gOfVelocity(2, 985)],
    ] as const;
    const record = recordOf({ rateHz, samples: plan.recordSamples, tones });
    const reading = measureRecord(plan, record);
    expect(Math.abs(reading.shaft.hz! / 24.7 - 1)).toBeLessThan(0.0005);
    expect(Math.abs(reading.orders['1'].mm_s! / 4 - 1)).toBeLessThan(0.003);
    // The band still reaches to 1000 Hz: the filter keeps 5 % more than Fmax clean.
    expect(Math.abs(reading.velocity.overall! / Math.hypot(4, 2) - 1)).toBeLessThan(0.005);
    // The nominal rate would put the speed 3 % off.
    const nominal = measureRecord(plan, { ...record, rate: { hz: 40_960, source: 'nominal', ppm: null } });
    expect(Math.abs(nominal.shaft.hz! / 24.7 - 1)).toBeGreaterThan(0.025);
  });

  it('is said to be uncertain where it is known to no better than half a percent', () => {
    const plan = planOf();
    const record = recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones: [[24.7, 0.2]] });
    const reading = measureRecord(plan, { ...record, rate: { hz: 40_960, source: 'measured', ppm: 8000 } });
    expect(reading.quality).toBe('uncertain');
    expect(reading.why).toEqual(['rate uncertain: 40960.0 Hz within 0.8 %']);
  });
});

describe('low speed', () => {
  it('takes the band from 2 Hz at 300 r/min, where 10 Hz would miss nearly all (ISO 10816-3 Annex A)', () => {
    const plan = planOf({ machine: { shaft: { kind: 'fixed', rpm: 300, tolerancePct: 3 } } });
    const tones = [
      [5, gOfVelocity(3, 5)],
      [15, gOfVelocity(1, 15)],
    ] as const;
    const reading = measureRecord(plan, recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones }));
    expect(plan.overallHz).toEqual([2, 1000]);
    expect(Math.abs(reading.velocity.overall! / Math.hypot(3, 1) - 1)).toBeLessThan(0.003);
    expect(Math.abs(reading.shaft.hz! / 5 - 1)).toBeLessThan(0.0005);
    expect(Math.abs(reading.orders['1'].mm_s! / 3 - 1)).toBeLessThan(0.003);
  });

  it('follows the measured speed where the settings allow both sides of 600 r/min', () => {
    const plan = planOf({ machine: { shaft: { kind: 'range', rpmRange: [400, 1500] } } });
    const fast = [
      [24, gOfVelocity(3, 24)],
      [5, gOfVelocity(3, 5)],
    ] as const;
    const slow = [
      [8, gOfVelocity(3, 8)],
      [5, gOfVelocity(1, 5)],
    ] as const;
    const samples = plan.recordSamples;
    const atFast = measureRecord(plan, recordOf({ rateHz: 40_960, samples, tones: fast }));
    const atSlow = measureRecord(plan, recordOf({ rateHz: 40_960, samples, tones: slow }));
    expect(Math.abs(atFast.velocity.overall! / 3 - 1)).toBeLessThan(0.005);
    expect(Math.abs(atSlow.velocity.overall! / Math.hypot(3, 1) - 1)).toBeLessThan(0.005);
  });
});

describe('nothing folds into the velocity band', () => {
  it('leaves no line in 0 to 1000 Hz above −80 dB of any tone from 1560 to 20 400 Hz', () => {
    const plan = planOf();
    const { factor } = plan.spectrum;
    const decimatedHz = 40_960 / factor;
    // Steps across the range, and the images of every stage that would land at 37, 500 and 990 Hz.
    const images = [1, 2, 3, 4, 5, 6, 7]
      .flatMap((k) => [37, 500, 990].flatMap((hz) => [k * decimatedHz - hz, k * decimatedHz + hz]))
      .filter((hz) => hz > 1560 && hz < 20_400);
    const steps = Array.from({ length: 24 }, (_, i) => 1560 + (i * (20_400 - 1560)) / 23);
    for (const toneHz of [...steps, ...images]) {
      const worst = worstLine(toneHz);
      expect(worst.db, `${toneHz} Hz leaves a line at ${worst.hz} Hz`).toBeLessThan(-80);
    }

    function worstLine(toneHz: number): { hz: number; db: number } {
      // Exact samples: a 16-bit count would hide −80 dB under its own noise.
      const acceleration = Float64Array.from({ length: 40_960 * 4 }, (_, i) =>
        Math.cos((2 * Math.PI * toneHz * i) / 40_960),
      );
      const { spectrum } = decimateRecord(plan, acceleration, 40_960)!;
      const amplitudes = lineAmplitudes(spectrum);
      const last = Math.floor(1000 / spectrum.binHz);
      let worst = { hz: 0, db: Number.NEGATIVE_INFINITY };
      for (let bin = 1; bin <= last; bin++) {
        const db = 20 * Math.log10(amplitudes[bin]!);
        if (db > worst.db) worst = { hz: bin * spectrum.binHz, db };
      }
      return worst;
    }
  });
});

describe('configured bands of broadband vibration', () => {
  // With and without padded blocks: 3.2 s are 8192 and 9600 samples.
  it.each([2560, 3000])('hold what the density of white noise says, at a rate of %d Hz', (rateHz) => {
    const noiseG = 0.05;
    const shaft = { kind: 'fixed', rpm: 300, tolerancePct: 0 } as const;
    const plan = planOf({ rateHz, machine: { shaft }, measure: { everyS: 600 } });
    const { velocity } = measureRecord(plan, recordOf({ rateHz, samples: plan.recordSamples, noiseG }));
    // A flat density of σ²/(rate/2), over (2πf)², from edge to edge: the integral of 1/f² is 1/f1 − 1/f2.
    const expected = (low: number, high: number) =>
      Math.sqrt((noiseG ** 2 / (rateHz / 2)) * (9806.65 / (2 * Math.PI)) ** 2 * (1 / low - 1 / high));
    // Random error of the RMS 1/(2√(BT)), B some 2 Hz at least: 1.4 % (Bendat and Piersol, from memory); twice that.
    expect(Math.abs(Number(velocity.low) / expected(2, 10) - 1)).toBeLessThan(0.03);
    expect(Math.abs(Number(velocity['running-speed']) / expected(4, 6) - 1)).toBeLessThan(0.03);
    expect(Math.abs(Number(velocity.harmonics) / expected(9, 51) - 1)).toBeLessThan(0.03);
  });
});
