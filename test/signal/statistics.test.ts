import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { meanFrequency, statistics } from '../../src/signal/statistics.ts';
import { noise, sine } from './support.ts';

it('gives the worked example', () => {
  const s = statistics(Float64Array.of(1, 2, 3, 4));
  expect(s.mean).toBe(2.5);
  expect(s.rms).toBeCloseTo(1.118033988749895, 14);
  expect([s.peak, s.peakToPeak, s.skewness]).toEqual([1.5, 3, 0]);
  expect(s.crest).toBeCloseTo(1.3416407864998738, 14);
  expect(s.kurtosis).toBeCloseTo(1.64, 14);
});

it('knows a sine: RMS A/√2, crest √2, kurtosis 1.5, whatever the offset', () => {
  for (const offset of [0, 1, -1e6]) {
    const s = statistics(sine(10_000, { rateHz: 10_000, hz: 50, amplitude: 3 }).map((v) => v + offset));
    // An offset of a million leaves ten digits.
    const digits = offset === -1e6 ? 8 : 12;
    expect(s.mean).toBeCloseTo(offset, digits);
    expect(s.rms).toBeCloseTo(3 / Math.SQRT2, digits);
    expect(s.crest).toBeCloseTo(Math.SQRT2, digits);
    expect(s.kurtosis).toBeCloseTo(1.5, digits);
    expect(s.skewness).toBeCloseTo(0, digits);
    expect(s.peakToPeak).toBeCloseTo(6, digits);
  }
});

it('gives a Gaussian kurtosis 3 and skewness 0', () => {
  // Standard errors √(24/n) and √(6/n) (Fisher; from memory): 0.0155 and 0.0077; four of them.
  const s = statistics(noise(100_000, 17));
  expect(Math.abs(s.kurtosis! - 3)).toBeLessThan(0.062);
  expect(Math.abs(s.skewness!)).toBeLessThan(0.031);
  expect(Math.abs(s.rms - 1)).toBeLessThan(0.01);
});

it('keeps its ratios under scaling and its signs under mirroring', () => {
  fc.assert(
    fc.property(
      fc.array(fc.double({ min: -1, max: 1, noNaN: true }), { minLength: 3, maxLength: 60 }),
      fc.double({ min: 0.001, max: 1000, noNaN: true }),
      (values, factor) => {
        fc.pre(Math.max(...values) - Math.min(...values) > 1e-3);
        const a = statistics(Float64Array.from(values));
        const b = statistics(Float64Array.from(values, (v) => -factor * v));
        expect(b.rms / a.rms / factor).toBeCloseTo(1, 9);
        expect(b.peak / a.peak / factor).toBeCloseTo(1, 9);
        expect(b.crest! / a.crest!).toBeCloseTo(1, 9);
        expect(b.kurtosis! / a.kurtosis!).toBeCloseTo(1, 9);
        expect(b.skewness).toBeCloseTo(-a.skewness!, 8);
        expect(a.kurtosis!).toBeGreaterThanOrEqual(1 + a.skewness! ** 2 - 1e-9);
      },
    ),
    { seed: 51, numRuns: 200 },
  );
});

it('has no ratios where nothing moves, and refuses no samples', () => {
  // Three times 0.1 sums to more than 0.3: the mean is not exactly the value.
  expect(statistics(Float64Array.of(0.1, 0.1, 0.1))).toMatchObject({
    rms: 0,
    peak: 0,
    peakToPeak: 0,
    crest: null,
    kurtosis: null,
    skewness: null,
  });
  expect(() => statistics(new Float64Array())).toThrow(SignalRangeError);
});

describe('mean frequency', () => {
  it('is that of a lone sine, at any level, and a quarter of the rate for white noise', () => {
    for (const hz of [10, 100, 3000, 4990]) {
      for (const amplitude of [1e-3, 40]) {
        const x = sine(10_000, { rateHz: 10_000, hz, amplitude });
        expect(Math.abs(meanFrequency(x, 10_000)! / hz - 1)).toBeLessThan(1e-3);
      }
    }
    // Expectation of the squared step is twice the variance; 100 000 samples know it to half a percent.
    expect(Math.abs(meanFrequency(noise(100_000, 5), 10_000)! / 2500 - 1)).toBeLessThan(0.01);
  });

  it('is null where nothing moves', () => {
    expect(meanFrequency(new Float64Array(10), 100)).toBeNull();
    expect(() => meanFrequency(new Float64Array(1), 100)).toThrow(SignalRangeError);
  });
});
