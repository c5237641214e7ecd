import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { clippedSamples } from '../../src/measure/clipping.ts';
import { gaussian, seeded } from '../support/seeded.ts';

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

  // Cut at half to 99 hundredths of the peak, slow to three eighths of the rate, clean to noisy, in 0.4 s. What cannot be
  // told: a cut of less than 4 counts, fewer than 100 samples cut among noise, and a tone of just a quarter of the rate.
  it.each([5, 25, 97.3, 1000, 3300, 9999, 15_000])('is seen in a tone of %d Hz wherever it is cut', (hz) => {
    let looked = 0;
    for (const amplitude of [400, 4000, 30_000]) {
      for (const share of [0, 0.001, 0.01, 0.2]) {
        const whole = sine(hz, amplitude, share * amplitude, 16_384);
        const peak = whole.reduce((most, count) => Math.max(most, Math.abs(count)), 0);
        for (const level of [0.5, 0.7, 0.9, 0.95, 0.99]) {
          const rail = Math.round(level * peak);
          const cut = whole.filter((count) => Math.abs(count) > rail).length;
          if (cut < 100 || peak - rail < 5) continue;
          looked++;
          const name = `${amplitude} with noise of ${share}, cut at ${level}: ${cut} samples`;
          expect(clippedSamples(clip(whole, rail)), name).toBeGreaterThan(0);
        }
      }
    }
    expect(looked).toBeGreaterThan(30);
  });

  it.each([1, 2, 2.5, 3])('is seen in noise cut at %d of its deviation', (deviations) => {
    for (const deviation of [30, 1000, 8000]) {
      const random = gaussian(9);
      const whole = Int32Array.from({ length: 81_920 }, () => Math.round(deviation * random()));
      const cut = clip(whole, Math.round(deviations * deviation));
      expect(clippedSamples(cut), `deviation ${deviation}`).toBeGreaterThan(0);
    }
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

  it('is not seen in tones that nearly fit the rate, nor in two tones or a modulated one', () => {
    const near = fc.record({
      q: fc.integer({ min: 2, max: 40 }),
      p: fc.integer({ min: 1, max: 19 }),
      off: fc.double({ min: -0.05, max: 0.05, noNaN: true }),
      amplitude: fc.double({ min: 20, max: 32_000, noNaN: true }),
    });
    fc.assert(
      fc.property(near, ({ p, q, off, amplitude }) => {
        fc.pre(2 * p < q);
        expect(clippedSamples(sine((RATE_HZ * p) / q + off, amplitude, 0, 20_480))).toBe(0);
      }),
      { numRuns: 300, seed: 12 },
    );
    const pair = fc.tuple(
      fc.double({ min: 1, max: 12_000, noNaN: true }),
      fc.double({ min: 1, max: 12_000, noNaN: true }),
      fc.double({ min: 0.01, max: 1, noNaN: true }),
    );
    fc.assert(
      fc.property(pair, ([a, b, share]) => {
        const [first, second] = [sine(a, 9000, 0, 20_480), sine(b, 9000 * share, 0, 20_480)];
        expect(clippedSamples(first.map((count, i) => count + second[i]!))).toBe(0);
        const modulated = first.map((count, i) => Math.round(count * (1 + second[i]! / 18_000)));
        expect(clippedSamples(modulated)).toBe(0);
      }),
      { numRuns: 200, seed: 13 },
    );
  });

  it.each([16, 7])('goes by the steps of a converter that steps by %d counts', (step) => {
    const stepped = (counts: Int32Array) => counts.map((count) => count * step);
    for (const noise of [0.3, 1, 2, 5, 40]) {
      for (const amplitude of [0, 20, 900]) {
        for (const hz of [5, 24.7, 3300]) {
          const whole = stepped(sine(hz, amplitude, noise));
          expect(clippedSamples(whole), `${amplitude} with ${noise} at ${hz} Hz`).toBe(0);
        }
      }
    }
    expect(clippedSamples(stepped(clip(sine(24.7, 900, 1), 800)))).toBeGreaterThan(0);
    expect(clippedSamples(stepped(clip(sine(3300, 900, 1), 800)))).toBeGreaterThan(0);
  });

  it('is not seen in noise that ends at an edge of its own, nor in tones with it', () => {
    const random = seeded(17);
    const even = () => 2 * random() - 1;
    for (const halfWidth of [1, 5, 20.5, 100]) {
      for (const amplitude of [0, 20, 93, 465]) {
        for (let record = 0; record < 40; record++) {
          const counts = sine(40, amplitude, 0, 8192).map((count) => count + Math.round(halfWidth * even()));
          expect(clippedSamples(counts), `${amplitude} with ±${halfWidth}, record ${record}`).toBe(0);
        }
      }
    }
  });

  it('is not seen in noise, nor in tones with noise, from less than a count to thousands', () => {
    for (const noise of [0.3, 1, 3, 10, 100, 3000]) {
      for (const amplitude of [0, 20, 900, 20_000]) {
        expect(clippedSamples(sine(24.7, amplitude, noise)), `${amplitude} with ${noise}`).toBe(0);
      }
    }
  });
});
