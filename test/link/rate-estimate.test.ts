import { describe, expect, it } from 'vitest';
import { RateEstimator } from '../../src/link/rate-estimate.ts';
import { Random } from '../../src/simulate/random.ts';

interface Line {
  nominalHz: number;
  trueHz: (tS: number) => number;
  /** How late each arrival is, in ms. */
  delayMs: (random: Random, tMs: number) => number;
  seconds: number;
  seed: number;
  frameSamples?: number;
}

/** Runs a node of a certain true rate over a line that delays, never reorders and never hurries. */
function run(
  line: Line,
  each: (estimator: RateEstimator, tS: number) => void = () => undefined,
): RateEstimator {
  const estimator = new RateEstimator(line.nominalHz);
  const random = new Random(line.seed);
  const frame = line.frameSamples ?? 330;
  let tS = 0;
  let arrivedMs = 0;
  for (let index = frame; tS < line.seconds; index += frame) {
    tS += frame / line.trueHz(tS);
    arrivedMs = Math.max(arrivedMs, 5000 + 1000 * tS + line.delayMs(random, 1000 * tS));
    estimator.observe(index, arrivedMs);
    each(estimator, tS);
  }
  return estimator;
}

const ppmOff = (hz: number, trueHz: number) => Math.abs(hz / trueHz - 1) * 1e6;

const delays: [string, Line['delayMs']][] = [
  ['a USB adapter that polls every 16 ms', (random, t) => 16 - (t % 16) + Math.abs(random.gauss()) * 0.2],
  ['up to 16 ms, all alike', (random) => 16 * random.uniform()],
  ['exponential delays of 3 ms', (random) => 3 * random.exponential()],
  ['stalls of 200 ms', (random) => random.exponential() + (random.uniform() < 0.01 ? 200 : 0)],
  [
    'a stretch of 3 s that is late throughout',
    (random, t) => random.exponential() + (t > 15_000 && t < 18_000 ? 60 : 0),
  ],
  ['a stall of 4 s', (random, t) => random.exponential() + (t > 6000 && t < 10_000 ? 10_000 - t : 0)],
];

describe('the sample rate estimate', () => {
  describe.each(delays)('over %s', (_name, delayMs) => {
    it.each([0.04, -0.03, 0.000_02])('is within 200 ppm after 20 s where the clock is off by %f', (off) => {
      for (let seed = 1; seed <= 5; seed++) {
        const trueHz = 40_960 * (1 + off);
        const { estimate } = run({ nominalHz: 40_960, trueHz: () => trueHz, delayMs, seconds: 20, seed });
        expect(estimate.source).toBe('measured');
        expect(ppmOff(estimate.hz, trueHz)).toBeLessThan(200);
        // Three standard uncertainties hold nearly always.
        expect(ppmOff(estimate.hz, trueHz)).toBeLessThan(3 * estimate.ppm!);
      }
    });
  });

  it('is what the node claims, uncertainty unknown, until the measurement is good enough', () => {
    let usedAfterS = 0;
    const line: Line = {
      nominalHz: 6400,
      trueHz: () => 6500,
      delayMs: (r) => 16 * r.uniform(),
      seconds: 30,
      seed: 4,
    };
    const first = run({ ...line, seconds: 9 });
    expect(first.estimate).toEqual({ hz: 6400, source: 'nominal', ppm: null });
    expect(first.measured).not.toBeNull();
    run(line, ({ estimate }, tS) => {
      if (estimate.source !== 'measured') return;
      if (usedAfterS === 0) usedAfterS = tS;
      expect(estimate.ppm).toBeLessThanOrEqual(200);
    });
    expect(usedAfterS).toBeGreaterThan(10);
    expect(usedAfterS).toBeLessThan(30);
  });

  it('stays with the claim over a line that nobody can time', () => {
    const wild = run({
      nominalHz: 1000,
      trueHz: () => 1010,
      delayMs: (random) => 3000 * random.uniform(),
      seconds: 12,
      seed: 1,
      frameSamples: 500,
    });
    expect(wild.estimate).toEqual({ hz: 1000, source: 'nominal', ppm: null });
  });

  it('follows an oscillator that warms up', () => {
    // 2000 ppm over ten minutes: two minutes of memory lag by about 200 ppm.
    const trueHz = (tS: number) => 25_600 * (1 + 0.002 * (tS / 600));
    const warm = run({
      nominalHz: 25_600,
      trueHz,
      delayMs: (r) => 2 * r.exponential(),
      seconds: 600,
      seed: 2,
    });
    expect(warm.estimate.source).toBe('measured');
    expect(ppmOff(warm.estimate.hz, trueHz(540))).toBeLessThan(30);
    expect(ppmOff(warm.estimate.hz, trueHz(600))).toBeLessThan(250);
  });

  it('grows surer with time', () => {
    const line = {
      nominalHz: 12_000,
      trueHz: () => 12_100,
      delayMs: (r: Random) => 8 * r.uniform(),
      seed: 3,
    };
    const early = run({ ...line, seconds: 15 }).estimate;
    const late = run({ ...line, seconds: 120 }).estimate;
    expect(late.ppm!).toBeLessThan(early.ppm! / 4);
    expect(ppmOff(late.hz, 12_100)).toBeLessThan(5);
  });

  it('keeps counting over a gap that took its time', () => {
    const estimator = new RateEstimator(1000);
    for (let k = 1; k <= 3000; k++) {
      if (k < 1000 || k > 1400) estimator.observe(k * 10, k * 10 * 1.001 + (k % 7) * 0.1);
    }
    expect(estimator.restarts).toBe(0);
    expect(ppmOff(estimator.estimate.hz, 1000 / 1.001)).toBeLessThan(20);
  });

  it('begins anew where the index jumps without time', () => {
    const estimator = new RateEstimator(1000);
    for (let k = 1; k <= 2000; k++) estimator.observe(k * 10 + (k > 1500 ? 1e6 : 0), k * 10 * 1.001);
    expect(estimator.restarts).toBe(1);
    expect(estimator.estimate.source).toBe('nominal');
    for (let k = 2001; k <= 3000; k++) estimator.observe(k * 10 + 1e6, k * 10 * 1.001);
    expect(ppmOff(estimator.estimate.hz, 1000 / 1.001)).toBeLessThan(20);
  });

  it('begins anew where time passes without samples and stays lost', () => {
    const estimator = new RateEstimator(1000);
    for (let k = 1; k <= 6000; k++) {
      estimator.observe(k * 10, k * 10 * 1.001 + (k > 3000 ? 700 : 0));
      // Never a rate that mixes the two: the step alone would make thousands of ppm.
      if (k === 6000) expect(ppmOff(estimator.estimate.hz, 1000 / 1.001)).toBeLessThan(20);
    }
    expect(estimator.restarts).toBe(1);
  });

  it('refuses a rate that is none', () => {
    for (const hz of [0, -1, Number.NaN, Number.POSITIVE_INFINITY])
      expect(() => new RateEstimator(hz)).toThrow(RangeError);
  });
});
