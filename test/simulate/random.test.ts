import { describe, expect, it } from 'vitest';
import { Random } from '../../src/simulate/random.ts';

describe('random numbers', () => {
  it('are those of xoshiro128** from the state 1, 2, 3, 4', () => {
    // First outputs by hand from the published step (Blackman and Vigna 2018): rotl(5·s1, 7)·9, then
    // s2 ^= s0, s3 ^= s1, s1 ^= s2, s0 ^= s3, s2 ^= s1 << 9, s3 = rotl(s3, 11).
    // 1: rotl(10, 7)·9 = 11520; the state becomes 7, 0, 1026, 12288, so 2: 0; it becomes
    // 12295, 1029, 1029, 25165824 (s1 = 0 ^ 1026 ^ 7), so 3: rotl(5145, 7)·9 = 5927040.
    const random = new Random([1, 2, 3, 4]);
    expect([random.uint32(), random.uint32(), random.uint32()]).toEqual([11520, 0, 5927040]);
    // And the fourth from memory of another implementation's test.
    expect(random.uint32()).toBe(70819200);
  });

  it('are Gaussian: mean 0, variance 1, kurtosis 3, 4.55 % beyond two deviations', () => {
    const random = new Random(7);
    const n = 200_000;
    let sum = 0;
    let square = 0;
    let fourth = 0;
    let beyond = 0;
    for (let i = 0; i < n; i++) {
      const x = random.gauss();
      sum += x;
      square += x * x;
      fourth += x ** 4;
      if (Math.abs(x) > 2) beyond++;
    }
    // Four standard errors of each: 1/√n, √(2/n), √(96/n) for x⁴ about 3, binomial.
    expect(Math.abs(sum / n)).toBeLessThan(4 / Math.sqrt(n));
    expect(Math.abs(square / n - 1)).toBeLessThan(4 * Math.sqrt(2 / n));
    expect(Math.abs(fourth / n - 3)).toBeLessThan(4 * Math.sqrt(96 / n));
    expect(Math.abs(beyond / n - 0.0455)).toBeLessThan(4 * Math.sqrt((0.0455 * 0.9545) / n));
  });

  it('wait exponentially: mean 1, and longer than 1 in 36.8 % of cases', () => {
    const random = new Random(8);
    const n = 100_000;
    let sum = 0;
    let longer = 0;
    for (let i = 0; i < n; i++) {
      const x = random.exponential();
      sum += x;
      if (x > 1) longer++;
    }
    expect(Math.abs(sum / n - 1)).toBeLessThan(4 / Math.sqrt(n));
    expect(Math.abs(longer / n - Math.exp(-1))).toBeLessThan(4 * Math.sqrt(0.2325 / n));
  });

  it('repeat for a seed and a label, and differ for others', () => {
    const first = (random: Random) => [random.uint32(), random.uint32(), random.uint32()];
    expect(first(Random.stream(1, 'shaft'))).toEqual(first(Random.stream(1, 'shaft')));
    expect(first(Random.stream(1, 'shaft'))).not.toEqual(first(Random.stream(1, 'flow')));
    expect(first(Random.stream(1, 'shaft'))).not.toEqual(first(Random.stream(2, 'shaft')));
  });

  it('refuse a state of four zeros, which would stay zero for ever', () => {
    expect(() => new Random([0, 0, 0, 0])).toThrow(/four zero words/);
  });
});
