import fc from 'fast-check';
import { expect, it } from 'vitest';
import { inverseFft, nextPowerOfTwo, realFft } from '../../src/signal/fft.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { naiveDft, noise } from './support.ts';

it.each([2, 4, 8, 16, 64, 128, 512])('agrees with the definition for %d real samples', (n) => {
  const x = noise(n, n);
  const bins = realFft(x);
  expect(bins.length).toBe(n + 2);
  naiveDft(x)
    .slice(0, n / 2 + 1)
    .forEach(({ re, im }, k) => {
      // Rounding grows with the sum of n terms of order 1.
      expect(Math.abs(bins[2 * k]! - re)).toBeLessThan(1e-12 * n);
      expect(Math.abs(bins[2 * k + 1]! - im)).toBeLessThan(1e-12 * n);
    });
});

it('comes back from the complex spectrum, and uses the scratch it is given', () => {
  const n = 256;
  const x = noise(n, 5);
  const spectrum = new Float64Array(2 * n);
  for (const [k, { re, im }] of naiveDft(x).entries()) spectrum.set([re, im], 2 * k);
  const scratch = new Float64Array(2 * n);
  expect(inverseFft(spectrum, scratch)).toBe(scratch);
  for (let i = 0; i < n; i++) {
    expect(scratch[2 * i]).toBeCloseTo(x[i]!, 11);
    expect(scratch[2 * i + 1]).toBeCloseTo(0, 11);
  }
  expect(realFft(x, scratch).buffer).toBe(scratch.buffer);
});

it('gives the worked examples', () => {
  const [re0, , re1, im1, re2] = realFft(Float64Array.of(1, 0, -1, 0));
  expect([re0, re1, im1, re2].map((v) => v! + 0)).toEqual([0, 2, 0, 0]);
  expect([...inverseFft(Float64Array.of(0, 0, 2, 0))].map((v) => v + 0)).toEqual([1, 0, -1, 0]);
  expect(nextPowerOfTwo(5120)).toBe(8192);
});

it('keeps the energy (Parseval)', () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 11 }), fc.integer(), (power, seed) => {
      const n = 2 ** power;
      const x = noise(n, seed);
      const bins = realFft(x);
      let energy = 0;
      for (let k = 0; k <= n / 2; k++) {
        energy += (k === 0 || k === n / 2 ? 1 : 2) * (bins[2 * k]! ** 2 + bins[2 * k + 1]! ** 2);
      }
      const direct = x.reduce((total, v) => total + v * v, 0);
      expect(energy / n / direct).toBeCloseTo(1, 12);
    }),
    { seed: 11, numRuns: 40 },
  );
});

it('finds the next power of two', () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 2 ** 22 }), (n) => {
      const power = nextPowerOfTwo(n);
      expect(Number.isInteger(Math.log2(power))).toBe(true);
      expect(power >= n && power / 2 < n).toBe(true);
    }),
    { seed: 12 },
  );
});

it('refuses lengths that it cannot transform and scratch that does not fit', () => {
  for (const n of [0, 1, 3, 48, 2 ** 23])
    expect(() => realFft(new Float64Array(n))).toThrow(SignalRangeError);
  expect(() => inverseFft(new Float64Array(6))).toThrow(SignalRangeError);
  expect(() => realFft(new Float64Array(8), new Float64Array(8))).toThrow(/out\.length is 8: needs to be 16/);
  expect(() => nextPowerOfTwo(2 ** 22 + 1)).toThrow(SignalRangeError);
  expect(() => nextPowerOfTwo(Number.NaN)).toThrow(SignalRangeError);
});
