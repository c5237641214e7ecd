import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { clippedSamples } from '../../src/measure/clipping.ts';
import { gaussian } from './bench.ts';

const RATE_HZ = 40_960;

function sine(hz: number, amplitude: number, noise = 0, samples = 81_920): Int32Array {
  const random = gaussian(5);
  return Int32Array.from({ length: samples }, (_, i) =>
    Math.round(amplitude * Math.sin((2 * Math.PI * hz * i) / RATE_HZ + 0.3) + noise * random()),
  );
}

function clip(counts: Int32Array, level: number): Int32Array {
  return counts.map((count) => Math.max(-level, Math.min(level, count)));
}

describe('clipping before the converter', () => {
  it.each([
    ['slow', 25, 0],
    ['slow and noisy', 25, 20],
    ['fast', 3300, 0],
    ['fast and noisy', 3300, 20],
  ])('is seen in a %s tone cut at nine tenths', (_, hz, noise) => {
    expect(clippedSamples(clip(sine(hz, 4000, noise), 3600))).toBeGreaterThan(0);
  });

  it('is seen where only a few impacts touch the rail, one sample each', () => {
    const random = gaussian(3);
    const counts = Int32Array.from({ length: 100_000 }, () => Math.round(1500 * random()));
    for (const at of [100, 20_000, 50_000, 70_000]) counts[at] = 9000;
    expect(clippedSamples(counts)).toBe(4);
    counts[100] = 8999;
    counts[20_000] = 8950;
    // Two at the extreme prove nothing.
    expect(clippedSamples(counts)).toBe(0);
  });

  it('is not seen at the smooth top of a clean tone, however slow or large', () => {
    const tone = fc.record({
      hz: fc.double({ min: 0.5, max: 15_000, noNaN: true }),
      amplitude: fc.double({ min: 3, max: 32_000, noNaN: true }),
    });
    fc.assert(
      fc.property(tone, ({ hz, amplitude }) => {
        expect(clippedSamples(sine(hz, amplitude, 0, 20_480))).toBe(0);
      }),
      { numRuns: 300, seed: 11 },
    );
  });

  it('is not seen in a tone that meets the same samples each period', () => {
    for (const hz of [2560, 5120, 10_240, 13_653.333333]) expect(clippedSamples(sine(hz, 8000))).toBe(0);
  });

  it('is not seen in noise, nor in tones with noise, from less than a count to thousands', () => {
    for (const noise of [0.3, 1, 3, 10, 100, 3000]) {
      for (const amplitude of [0, 20, 900, 20_000]) {
        expect(clippedSamples(sine(24.7, amplitude, noise)), `${amplitude} with ${noise}`).toBe(0);
      }
    }
  });
});
