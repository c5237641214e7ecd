import { describe, expect, it } from 'vitest';
import { type BearingKnowledge, bearingMultiples } from '../../src/machine/bearing.ts';

const MM_PER_INCH = 25.4;

function bearing(elements: number, elementIn: number, pitchIn: number, contactDeg: number): BearingKnowledge {
  return {
    elements,
    geometry: { elementMm: elementIn * MM_PER_INCH, pitchMm: pitchIn * MM_PER_INCH, contactDeg },
    multiples: null,
  };
}

describe('bearing multiples against published tables', () => {
  // Tolerance 5e-4: the inches of the tables carry four figures.
  it('agree with the Case Western bearing data center, drive end 6205', () => {
    const rates = bearingMultiples(bearing(9, 0.3126, 1.537, 0))!;
    expect(Math.abs(rates.bpfi - 5.4152)).toBeLessThan(5e-4);
    expect(Math.abs(rates.bpfo - 3.5848)).toBeLessThan(5e-4);
    expect(Math.abs(rates.ftf - 0.39828)).toBeLessThan(5e-4);
    expect(Math.abs(2 * rates.bsf - 4.7135)).toBeLessThan(5e-4);
    expect(rates.certain).toBe(true);
  });

  it('agree with the Case Western bearing data center, fan end 6203 (element diameter from memory)', () => {
    const rates = bearingMultiples(bearing(8, 0.2656, 1.122, 0))!;
    expect(Math.abs(rates.bpfi - 4.9469)).toBeLessThan(5e-4);
    expect(Math.abs(rates.bpfo - 3.053)).toBeLessThan(5e-4);
    expect(Math.abs(rates.ftf - 0.3817)).toBeLessThan(5e-4);
    expect(Math.abs(2 * rates.bsf - 3.9874)).toBeLessThan(5e-4);
  });

  it('agree with the bearing data of the Society for Machinery Failure Prevention Technology at 25 Hz', () => {
    const rates = bearingMultiples(bearing(8, 0.235, 1.245, 0))!;
    expect(Math.abs(25 * rates.bpfo - 81.125)).toBeLessThan(25 * 5e-4);
    expect(Math.abs(25 * rates.bpfi - 118.875)).toBeLessThan(25 * 5e-4);
  });

  it('agree with the IMS bearing data at 2000 r/min, where the contact angle is 15.17 degrees', () => {
    const rates = bearingMultiples(bearing(16, 0.331, 2.815, 15.17))!;
    const shaftHz = 2000 / 60;
    // Published to one decimal.
    expect(shaftHz * rates.bpfo).toBeCloseTo(236.4, 1);
    expect(shaftHz * rates.bpfi).toBeCloseTo(296.9, 1);
    expect(shaftHz * rates.bsf).toBeCloseTo(139.9, 1);
    expect(shaftHz * rates.ftf).toBeCloseTo(14.8, 1);
  });

  it('keep the identities BPFO = n·FTF and BPFO + BPFI = n', () => {
    for (const elements of [7, 8, 12, 23]) {
      const rates = bearingMultiples(bearing(elements, 0.25, 2.2, 12))!;
      expect(rates.bpfo).toBeCloseTo(elements * rates.ftf, 12);
      expect(rates.bpfo + rates.bpfi).toBeCloseTo(elements, 12);
    }
  });
});

describe('what is known of a bearing', () => {
  it('takes given multiples as they are, before any geometry', () => {
    const multiples = { ftf: 0.382, bsf: 1.994, bpfo: 3.053, bpfi: 4.947 };
    const known = { ...bearing(9, 0.3126, 1.537, 0), multiples };
    expect(bearingMultiples(known)).toEqual({ ...multiples, certain: true });
  });

  it('falls back on 0.4·n, 0.6·n and 0.4 from the elements alone, and says so (common practice, no source)', () => {
    const rates = bearingMultiples({ elements: 8, geometry: null, multiples: null })!;
    expect(rates.bpfo).toBeCloseTo(3.2, 12);
    expect(rates.bpfi).toBeCloseTo(4.8, 12);
    expect(rates.ftf).toBeCloseTo(0.4, 12);
    expect(rates.bsf).toBeCloseTo(2.4, 12);
    expect(rates.certain).toBe(false);
  });

  it('is nothing without elements and multiples', () => {
    expect(bearingMultiples({ elements: null, geometry: null, multiples: null })).toBeNull();
  });

  it('refuses a geometry that cannot be built', () => {
    expect(() => bearingMultiples(bearing(9, 0.6, 1.537, 0))).toThrow(/do not fit/);
    expect(() => bearingMultiples(bearing(9, 0.3126, 1.537, 90))).toThrow(/contact angle/);
    expect(() => bearingMultiples(bearing(2, 0.3126, 1.537, 0))).toThrow(/at least 3/);
    expect(() => bearingMultiples(bearing(8.5, 0.3126, 1.537, 0))).toThrow(/whole number/);
  });
});
