import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import { gOfVelocity, planOf, recordOf } from './bench.ts';

const RATE_HZ = 12_000;
const plan = planOf({ rateHz: RATE_HZ });
const tones = [
  [24.7, gOfVelocity(3, 24.7)],
  [148.2, 0.05],
] as const;
const base = recordOf({ rateHz: RATE_HZ, samples: plan.recordSamples, tones, noiseG: 0.02 });
const reading = measureRecord(plan, base);

describe('a reading does not depend on', () => {
  it('where on the node’s index the record stands, nor on what was measured before', () => {
    const again = measureRecord(plan, { ...base, firstIndex: 50_331_648 });
    expect({ ...again, first_index: 0 }).toEqual(reading);
    expect(again.first_index).toBe(50_331_648);
  });

  it('a constant offset of the counts', () => {
    fc.assert(
      fc.property(fc.integer({ min: -8000, max: 8000 }), (offset) => {
        const moved = measureRecord(plan, { ...base, counts: base.counts.map((count) => count + offset) });
        expect(moved.velocity.overall).toBeCloseTo(reading.velocity.overall!, 9);
        expect(moved.acceleration.rms).toBeCloseTo(reading.acceleration.rms!, 9);
        expect(moved.displacement.p2p).toBeCloseTo(reading.displacement.p2p!, 6);
      }),
      { numRuns: 5, seed: 3 },
    );
  });

  it('the sign of the sensor, phase aside', () => {
    const turned = measureRecord(plan, { ...base, counts: base.counts.map((count) => -count) });
    expect(turned.velocity.overall).toBeCloseTo(reading.velocity.overall!, 9);
    expect(turned.shaft.hz).toBeCloseTo(reading.shaft.hz!, 9);
    expect(turned.acceleration.kurtosis).toBeCloseTo(reading.acceleration.kurtosis!, 9);
  });

  it('and grows with the scale of a count as it must', () => {
    fc.assert(
      fc.property(fc.double({ min: 1.5, max: 20, noNaN: true }), (factor) => {
        const scaled = measureRecord(plan, { ...base, unitsPerCount: base.unitsPerCount * factor });
        expect(scaled.velocity.overall! / factor).toBeCloseTo(reading.velocity.overall!, 9);
        expect(scaled.displacement.rms! / factor).toBeCloseTo(reading.displacement.rms!, 8);
        expect(scaled.acceleration.crest).toBeCloseTo(reading.acceleration.crest!, 9);
        expect(scaled.shaft.hz).toBeCloseTo(reading.shaft.hz!, 9);
      }),
      { numRuns: 5, seed: 4 },
    );
  });

  it('and leaves the record as it was', () => {
    const before = base.counts.slice();
    measureRecord(plan, base);
    expect(base.counts).toEqual(before);
  });
});
