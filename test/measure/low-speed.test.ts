/** A pump at 300 r/min, with records long enough for it. */
import { describe, expect, it } from 'vitest';
import { severityLimits, zoneOf } from '../../src/machine/severity.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import { type BenchOptions, gOfVelocity, planOf, recordOf, type Tone, usual } from './bench.ts';

const RATE_HZ = 6400;
const severity = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;
const limits = severityLimits(severity);
const slow: BenchOptions = {
  rateHz: RATE_HZ,
  point: { severity },
  machine: {
    shaft: { kind: 'fixed', rpm: 300, tolerancePct: 3 },
    running: { kind: 'velocity', aboveMmS: 0.1 },
  },
  measure: { everyS: 30, velocity: { ...usual.velocity, lines: 8000 } },
};

const line = (hz: number, mmS: number): Tone => [hz, gOfVelocity(mmS, hz)];
/** RMS displacement in µm of an RMS velocity in mm/s: d = v/(2πf). */
const umOf = (mmS: number, hz: number) => (1000 * mmS) / (2 * Math.PI * hz);

function read(tones: readonly Tone[], options: BenchOptions = slow) {
  const plan = planOf(options);
  const samples = plan.recordSamples;
  return measureRecord(plan, recordOf({ rateHz: RATE_HZ, samples, tones, noiseG: 0.0005 }));
}

describe('300 r/min', () => {
  it('takes records of at least four blocks of 8 s, and the band from 2 Hz (ISO 10816-3 Annex A)', () => {
    const plan = planOf(slow);
    expect(plan.spectrum.lineHz).toBeCloseTo(0.125, 9);
    expect(plan.recordSamples / RATE_HZ).toBeGreaterThanOrEqual(20);
    expect(plan.overallHz).toEqual([2, 1000]);
    expect(plan.warnings.filter((text) => !text.startsWith('envelope band'))).toEqual([]);
  });

  it('reads velocity and displacement down to 2 Hz, and what lies beside the shaft apart from it', () => {
    const reading = read([line(2, 0.5), line(5, 1.2), line(5.6, 0.4), line(10, 0.3)]);
    expect(reading).toMatchObject({ quality: 'good', why: [], running: true });
    expect(Math.abs(reading.shaft.hz! / 5 - 1)).toBeLessThan(0.0005);
    expect(Math.abs(reading.velocity.overall! / Math.hypot(0.5, 1.2, 0.4, 0.3) - 1)).toBeLessThan(0.005);
    const um = Math.hypot(umOf(0.5, 2), umOf(1.2, 5), umOf(0.4, 5.6), umOf(0.3, 10));
    expect(Math.abs(reading.displacement.rms! / um - 1)).toBeLessThan(0.01);
    expect(Math.abs(reading.orders['1'].mm_s! / 1.2 - 1)).toBeLessThan(0.005);
    expect(Math.abs(reading.orders['2'].mm_s! / 0.3 - 1)).toBeLessThan(0.02);
    expect(reading.displacement.p2p!).toBeGreaterThan(2 * Math.SQRT2 * umOf(1.2, 5));
  });

  // ISO 20816-3 group 2 rigid: 1.4, 2.8, 4.5 mm/s and 22, 45, 71 µm; the two cross near 10 Hz (5.2.3: the more severe).
  it.each([
    [0.6, 'A'],
    [1.0, 'B'],
    [2.0, 'C'],
    [2.7, 'D'],
  ] as const)('has its zone by displacement: %d mm/s at 5 Hz is zone %s', (mmS, zone) => {
    const reading = read([line(5, mmS)]);
    expect(reading.zone).toBe(zone);
    expect(zoneOf(reading.displacement.rms!, limits.displacementUm!)).toBe(zone);
    expect(zoneOf(reading.velocity.overall!, limits.velocityMmS) <= 'B').toBe(true);
  });

  it('has it by velocity at 1500 r/min with the same table', () => {
    const machine = { shaft: { kind: 'fixed', rpm: 1500, tolerancePct: 3 } } as const;
    const reading = read([line(25, 3)], { ...slow, machine });
    expect(reading.zone).toBe('C');
    expect(zoneOf(reading.displacement.rms!, limits.displacementUm!)).toBe('A');
  });

  it('is null, with the reason, where the record is too short for lines that reach 2 Hz', () => {
    const plan = planOf(slow);
    const record = recordOf({ rateHz: RATE_HZ, samples: RATE_HZ, tones: [line(5, 3)], noiseG: 0.0005 });
    const reading = measureRecord(plan, record);
    expect(reading).toMatchObject({
      quality: 'uncertain',
      zone: null,
      displacement: { rms: null, p2p: null },
    });
    expect(reading.velocity.overall).toBeNull();
    expect(reading.why.join('\n')).toMatch(/record too short: overall velocity from 2 Hz needs lines finer/);
  });
});
