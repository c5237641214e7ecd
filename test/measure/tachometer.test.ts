import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import { pulsesTooShort, tachometerSpeed } from '../../src/measure/tachometer.ts';
import { gOfVelocity, planOf, recordOf } from './bench.ts';

const RATE_HZ = 40_960;

const tachometer = {
  shaft: { kind: 'tachometer', link: 'node-1', channel: 't', pulsesPerRev: 1 },
} as const;

/** High for a third of the time; angle(i) in turns. */
function pulses(samples: number, angle: (sample: number) => number, perTurn = 1): Int32Array {
  return Int32Array.from({ length: samples }, (_, i) => {
    const part = (angle(i) * perTurn) % 1;
    return part >= 0 && part < 1 / 3 ? 1 : 0;
  });
}

describe('speed from pulses', () => {
  it.each([1, 2, 60])('is the mean over whole turns, with %d pulses a turn', (perTurn) => {
    const counts = pulses(409_600, (i) => 0.2 + (24.683 * i) / RATE_HZ, perTurn);
    const speed = tachometerSpeed(counts, perTurn, RATE_HZ)!;
    expect(Math.abs(speed.hz / 24.683 - 1)).toBeLessThan(1e-5);
    // Each edge is known to a sample: 1/1660 of a turn.
    expect(speed.spread).toBeLessThan(0.002);
  });

  it('interpolates the counts of a slow edge', () => {
    const counts = Int32Array.from({ length: 81_920 }, (_, i) =>
      Math.round(30_000 * Math.sin((2 * Math.PI * 25.03 * i) / RATE_HZ)),
    );
    const speed = tachometerSpeed(counts, 1, RATE_HZ)!;
    // Whole samples alone would leave up to 1.2e-5: one sample of the 81 920.
    expect(Math.abs(speed.hz / 25.03 - 1)).toBeLessThan(1e-6);
    expect(speed.edges[1]! - speed.edges[0]!).toBeCloseTo(RATE_HZ / 25.03, 1);
  });

  it('measures how much turns differ, and does not mind uneven pulses within a turn', () => {
    const ramp = pulses(409_600, (i) => (24 * i + (0.5 * 0.1 * i * i) / RATE_HZ) / RATE_HZ);
    expect(tachometerSpeed(ramp, 1, RATE_HZ)!.spread).toBeCloseTo(1 / 24.5, 2);
    const uneven = Int32Array.from({ length: 81_920 }, (_, i) => {
      const part = ((20 * i) / RATE_HZ) % 1;
      return part < 0.05 || (part > 0.4 && part < 0.45) ? 1 : 0;
    });
    const speed = tachometerSpeed(uneven, 2, RATE_HZ)!;
    expect(speed.hz).toBeCloseTo(20, 3);
    expect(speed.spread).toBeLessThan(0.002);
  });

  it('takes a single high sample for a glitch: pulses are at least two samples wide', () => {
    const counts = pulses(409_600, (i) => 0.2 + (20 * i) / RATE_HZ);
    for (const at of [5000, 77_777, 300_001]) counts[at] = 1;
    expect(tachometerSpeed(counts, 1, RATE_HZ)!.hz).toBeCloseTo(20, 3);
  });

  it.each([
    // Of these the sound pulses alone would beat at a steady 240 r/min.
    [6400, 2960, 60],
    [25_600, 1480, 360],
    [5120, 1480, 60],
  ])(
    'is no speed where pulses are shorter than two samples: %d Hz, %d r/min, %d a turn',
    (rateHz, rpm, perTurn) => {
      const hz = (rpm / 60) * perTurn;
      const counts = Int32Array.from({ length: 10 * rateHz }, (_, i) =>
        ((i / rateHz) * hz + 0.01) % 1 < 0.5 ? 1 : 0,
      );
      expect(pulsesTooShort(counts)).toBe(true);
      const plan = planOf({ rateHz, machine: tachometer });
      const pulses = { counts: counts.subarray(0, plan.recordSamples), pulsesPerRev: perTurn };
      const tones = [[rpm / 60, gOfVelocity(2, rpm / 60)]] as const;
      const reading = measureRecord(
        plan,
        recordOf({ rateHz, samples: plan.recordSamples, tones, tachometer: pulses }),
      );
      expect(reading.shaft.hz).toBeNull();
      expect(reading.why.join()).toMatch(/pulses are shorter than two samples/);
    },
  );

  it.each([
    [2560, 1780],
    [3200, 2960],
    [5120, 3550],
  ])('does not vary for the edges being known to a sample: %d Hz, %d r/min', (rateHz, rpm) => {
    const plan = planOf({ rateHz, machine: tachometer });
    const hz = rpm / 60;
    const counts = Int32Array.from({ length: plan.recordSamples }, (_, i) =>
      ((i / rateHz) * hz) % 1 < 0.4 ? 1 : 0,
    );
    const tones = [[hz, gOfVelocity(2, hz)]] as const;
    const pulses = { counts, pulsesPerRev: 1 };
    const reading = measureRecord(
      plan,
      recordOf({ rateHz, samples: plan.recordSamples, tones, tachometer: pulses }),
    );
    expect(reading.why.filter((text) => text.includes('varies'))).toEqual([]);
    expect(Math.abs(reading.shaft.hz! / hz - 1)).toBeLessThan(1e-3);
  });

  it('is null without two pulses, and nothing is high at 0 or below', () => {
    expect(tachometerSpeed(new Int32Array(4096), 1, RATE_HZ)).toBeNull();
    expect(tachometerSpeed(new Int32Array(4096).fill(1), 1, RATE_HZ)).toBeNull();
    expect(
      tachometerSpeed(
        pulses(4096, (i) => (12 * i) / RATE_HZ - 0.5),
        1,
        RATE_HZ,
      ),
    ).toBeNull();
    const negative = pulses(8192, (i) => (20 * i) / RATE_HZ).map((count) => count - 1);
    expect(tachometerSpeed(negative, 1, RATE_HZ)).toBeNull();
  });
});

describe('a reading with a tachometer', () => {
  const tachometerShaft = { kind: 'tachometer', link: 'node-1', channel: 'tach', pulsesPerRev: 1 } as const;
  const plan = planOf({ machine: { shaft: tachometerShaft } });
  const samples = plan.recordSamples;
  const counts = pulses(samples, (i) => 0.37 + (24.683 * i) / RATE_HZ);
  /** Velocity v = V·cos(k·θ − lag), so acceleration leads it by a quarter turn; θ is 0 at the rising edge. */
  const tone = (order: number, mmS: number, lagDeg: number) =>
    [
      order * 24.683,
      gOfVelocity(mmS, order * 24.683),
      2 * Math.PI * order * 0.37 - (lagDeg * Math.PI) / 180 + Math.PI / 2,
    ] as const;
  const tones = [tone(1, 4, 70), tone(2, 1, 200), tone(3, 0.5, 355)];
  const record = recordOf({ rateHz: RATE_HZ, samples, tones, tachometer: { counts, pulsesPerRev: 1 } });

  it('has its speed from the pulses, and the lag of each order behind the rising edge', () => {
    const reading = measureRecord(plan, record);
    expect(reading.quality).toBe('good');
    expect(reading.shaft.source).toBe('tachometer');
    expect(Math.abs(reading.shaft.hz! / 24.683 - 1)).toBeLessThan(1e-5);
    expect(Math.abs(reading.orders['1'].mm_s! / 4 - 1)).toBeLessThan(0.003);
    expect(Math.abs(reading.orders['2'].mm_s! / 1 - 1)).toBeLessThan(0.01);
    expect(Math.abs(reading.orders['3'].mm_s! / 0.5 - 1)).toBeLessThan(0.02);
    // An edge is known to half a sample on average: 0.1° of the shaft.
    expect(Math.abs(reading.orders['1'].deg! - 70)).toBeLessThan(0.5);
    expect(Math.abs(reading.orders['2'].deg! - 200)).toBeLessThan(1);
    expect(Math.abs(reading.orders['3'].deg! - 355)).toBeLessThan(1.5);
  });

  it('scales the speed by the ratio of the point, and then has no phase: the pulses are of another shaft', () => {
    const geared = planOf({ machine: { shaft: tachometerShaft }, point: { ratio: 2 } });
    const reading = measureRecord(geared, record);
    expect(reading.shaft.hz! / 2 / 24.683).toBeCloseTo(1, 5);
    expect(reading.orders['1'].mm_s).toBeCloseTo(1, 1);
    expect(reading.orders['1'].deg).toBeNull();
  });

  it('has no phase where nothing stands out of the noise: its phase would be chance', () => {
    const first = [tone(1, 4, 70)];
    for (let seed = 1; seed <= 5; seed++) {
      const noisy = { rateHz: RATE_HZ, samples, noiseG: 0.1, seed, tachometer: { counts, pulsesPerRev: 1 } };
      const { orders } = measureRecord(plan, recordOf({ ...noisy, tones: first }));
      expect(Math.abs(orders['1'].deg! - 70)).toBeLessThan(1);
      expect(orders['2'].mm_s).toBeGreaterThan(0);
      expect([orders['2'].deg, orders['3'].deg]).toEqual([null, null]);
    }
  });

  it('has no phase with several pulses a turn: none of them is the mark', () => {
    const many = { counts: pulses(samples, (i) => 0.37 + (24.683 * i) / RATE_HZ, 2), pulsesPerRev: 2 };
    const reading = measureRecord(plan, { ...record, tachometer: many });
    expect(reading.shaft.hz! / 24.683).toBeCloseTo(1, 5);
    expect(reading.orders['1'].deg).toBeNull();
  });

  it('says so where the speed varies, and names no speed where it varies wildly', () => {
    const ramp = (rise: number) => ({
      counts: pulses(samples, (i) => (24 * i + (0.5 * rise * i * i) / RATE_HZ) / RATE_HZ),
      pulsesPerRev: 1,
    });
    const drifting = measureRecord(plan, { ...record, tachometer: ramp(0.1) });
    expect(drifting.quality).toBe('uncertain');
    expect(drifting.why.join()).toMatch(/speed varies by 4.\d % within the record/);
    expect(drifting.shaft.hz).toBeCloseTo(24.5, 1);
    const starting = measureRecord(plan, { ...record, tachometer: ramp(1) });
    expect(starting.shaft).toEqual({ hz: null, source: null });
    expect(starting.why.join()).toMatch(/speed unknown: it varies by/);
    expect(starting.velocity['running-speed']).toBeNull();
    expect(starting.orders['1']).toEqual({ mm_s: null, deg: null });
  });

  it('runs while there are pulses, where the settings go by them', () => {
    const byPulses = planOf({ machine: { shaft: tachometerShaft, running: { kind: 'tachometer' } } });
    expect(measureRecord(byPulses, record).running).toBe(true);
    const still = { ...record, tachometer: { counts: new Int32Array(samples), pulsesPerRev: 1 } };
    const stopped = measureRecord(byPulses, still);
    expect(stopped).toMatchObject({ running: false, zone: null, shaft: { hz: null }, quality: 'good' });
    expect(measureRecord(byPulses, { ...record, tachometer: null, toldShaftHz: 24 }).running).toBe(true);
    expect(measureRecord(byPulses, { ...record, tachometer: null }).running).toBeNull();
  });
});
