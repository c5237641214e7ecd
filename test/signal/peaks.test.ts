import fc from 'fast-check';
import { expect, it } from 'vitest';
import { localMaxima, median, runningMedian } from '../../src/signal/peaks.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { noise } from './support.ts';

function naiveMedian(values: number[]): number {
  const sorted = [...values].sort((a, b) => a - b);
  const half = sorted.length / 2;
  return sorted.length % 2 === 1 ? sorted[half - 0.5]! : (sorted[half - 1]! + sorted[half]!) / 2;
}

it('finds local maxima, a flat top once, the ends never', () => {
  expect(localMaxima(Float64Array.of(0, 2, 1, 3, 3, 0))).toEqual([1, 3]);
  expect(localMaxima(Float64Array.of(5, 1, 5))).toEqual([]);
  const values = Float64Array.of(0, 1, 0, 1, 0, 1, 0);
  expect(localMaxima(values, { from: 2, to: 4 })).toEqual([3]);
  expect(localMaxima(new Float64Array(2))).toEqual([]);
});

it('slides a median as the definition does', () => {
  expect([...runningMedian(Float64Array.of(1, 9, 2, 3), 1)]).toEqual([5, 2, 3, 2.5]);
  fc.assert(
    fc.property(
      fc.array(fc.integer({ min: -20, max: 20 }), { maxLength: 80 }),
      fc.integer({ min: 0, max: 50 }),
      (values, halfWidth) => {
        const expected = values.map((_, i) =>
          naiveMedian(values.slice(Math.max(0, i - halfWidth), i + halfWidth + 1)),
        );
        expect([...runningMedian(Float64Array.from(values), halfWidth)]).toEqual(expected);
      },
    ),
    { seed: 61, numRuns: 200 },
  );
});

it('is not lifted by a line', () => {
  const values = noise(400, 2).map(Math.abs);
  const floor = runningMedian(values, 30);
  values[200] = 1000;
  const lifted = runningMedian(values, 30);
  expect(lifted[200]! - floor[200]!).toBeLessThan(0.1);
});

it('takes a median without touching the values, and refuses none', () => {
  const values = Float64Array.of(3, 1, 2, 10);
  expect(median(values)).toBe(2.5);
  expect([...values]).toEqual([3, 1, 2, 10]);
  expect(median(Float64Array.of(-1, -30, 5))).toBe(-1);
  expect(() => median(new Float64Array())).toThrow(SignalRangeError);
  expect(() => runningMedian(values, 1.5)).toThrow(SignalRangeError);
});
