import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { chooseFactor, decimate, planDecimation } from '../../src/signal/decimate.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { decibels, noise, sine, toneAmplitude } from './support.ts';

const usual = planDecimation({ rateHz: 40_960, factor: 16, fmaxHz: 1000, attenuationDb: 80 });

/** Each stage by the definition of convolution, one output at a time. */
function naive(plan: typeof usual, x: Float64Array): Float64Array {
  let samples = [...x];
  for (const { taps, factor } of plan.stages) {
    const trim = taps.findIndex((t) => t !== 0);
    const kept = [...taps].slice(trim, taps.length - trim);
    const out: number[] = [];
    for (let at = 0; at + kept.length <= samples.length; at += factor) {
      out.push(kept.reduce((total, tap, i) => total + tap * samples[at + i]!, 0));
    }
    samples = out;
  }
  return Float64Array.from(samples);
}

describe('40 960 Hz by 16 for 1000 Hz', () => {
  it('runs in four stages of two', () => {
    expect(usual.stages.map((s) => s.factor)).toEqual([2, 2, 2, 2]);
    expect(usual.outRateHz).toBe(2560);
    expect(usual.marginSamples).toBe(usual.firstOutputAt);
  });

  it('ripples by at most 0.1 dB up to 1000 Hz', () => {
    for (let f = 0; f <= 1000; f += 2.5) expect(Math.abs(decibels(usual.response(f)))).toBeLessThan(0.1);
  });

  it('leaves no image of a tone from 1560 to 20 400 Hz above −80 dB in 0 to 1000 Hz', () => {
    const n = usual.inputLength(2560);
    const frequencies = new Set<number>();
    for (let f = 1560; f <= 20_400; f += 157) frequencies.add(f);
    // The places that fold into the band at each stage, their edges above all.
    for (let k = 1; k <= 8; k++) {
      for (const offset of [-1000, -500, -7, 7, 500, 1000]) {
        const f = k * 2560 + offset;
        if (f >= 1560 && f <= 20_400) frequencies.add(f);
      }
    }
    for (const hz of frequencies) {
      const folded = Math.abs(hz - 2560 * Math.round(hz / 2560));
      if (folded > 1000) continue;
      const out = decimate(usual, sine(n, { rateHz: 40_960, hz, phase: 0.4 }));
      const seen = decibels(toneAmplitude(out, 2560, folded));
      expect(seen, `${hz} Hz folds to ${folded} Hz`).toBeLessThan(-80);
      expect(decibels(usual.response(hz))).toBeLessThan(-80);
    }
    expect(frequencies.size).toBeGreaterThan(120);
  });
});

it.each([
  [40_960, 1000, 16],
  [25_600, 1000, 10],
  [12_000, 1000, 4],
  [48_828, 1000, 18],
  [51_200, 1000, 20],
  [6400, 1000, 2],
  [40_960, 16_000, 1],
  [40_960, 100, 160],
  [2560, 1000, 1],
])('chooses a factor for %d Hz and Fmax %d Hz: %d', (rateHz, fmaxHz, factor) => {
  expect(chooseFactor(rateHz, fmaxHz)).toBe(factor);
});

it('protects the band at every rate and Fmax', () => {
  fc.assert(
    fc.property(
      fc.integer({ min: 3000, max: 60_000 }),
      fc.double({ min: 0.003, max: 0.38, noNaN: true }),
      fc.integer({ min: 40, max: 100 }),
      (rateHz, share, attenuationDb) => {
        const fmaxHz = rateHz * share;
        const factor = chooseFactor(rateHz, fmaxHz);
        const plan = planDecimation({ rateHz, factor, fmaxHz, attenuationDb });
        expect(plan.outRateHz).toBeGreaterThanOrEqual(2.56 * fmaxHz * (1 - 1e-9));
        expect(plan.stages.reduce((product, s) => product * s.factor, 1)).toBe(factor);
        for (let i = 0; i <= 20; i++) {
          const f = (fmaxHz * i) / 20;
          // One stage ripples by no more than its stop band; a cascade by their sum.
          const ripple = plan.stages.length * 2.2 * 10 ** (-attenuationDb / 20);
          expect(Math.abs(plan.response(f) - 1)).toBeLessThan(ripple + 1e-12);
          for (let k = 1; 2 * k <= factor; k++) {
            for (const image of [k * plan.outRateHz - f, k * plan.outRateHz + f]) {
              if (image <= rateHz / 2)
                expect(decibels(plan.response(image))).toBeLessThan(-attenuationDb + 0.05);
            }
          }
        }
      },
    ),
    { seed: 31, numRuns: 60 },
  );
});

it('equals plain convolution, whatever the factor', () => {
  for (const factor of [2, 3, 5, 6, 7, 12, 16, 18, 35]) {
    const plan = planDecimation({ rateHz: 1000, factor, fmaxHz: 1000 / factor / 2.56, attenuationDb: 80 });
    const x = noise(plan.inputLength(700) + 3, factor);
    const out = decimate(plan, x);
    const reference = naive(plan, x);
    expect(out.length).toBe(reference.length);
    // Only the order of the sums differs.
    for (let i = 0; i < out.length; i++) expect(Math.abs(out[i]! - reference[i]!)).toBeLessThan(1e-13);
  }
});

it('says how many samples come out and where they stand', () => {
  fc.assert(
    fc.property(fc.integer({ min: 1, max: 40 }), fc.integer({ min: 0, max: 300 }), (factor, extra) => {
      const plan = planDecimation({ rateHz: 1000, factor, fmaxHz: 1000 / factor / 3, attenuationDb: 60 });
      const n = plan.inputLength(1) + extra;
      // A ramp passes a symmetric filter unchanged: each output is its own raw index.
      const out = decimate(
        plan,
        Float64Array.from({ length: n }, (_, i) => i),
      );
      expect(out.length).toBe(plan.outputLength(n));
      out.forEach((v, k) => {
        expect(v).toBeCloseTo(plan.firstOutputAt + k * factor, 8);
      });
      expect(plan.outputLength(plan.inputLength(out.length))).toBe(out.length);
      expect(plan.outputLength(plan.inputLength(out.length) - 1)).toBe(out.length - 1);
    }),
    { seed: 32, numRuns: 60 },
  );
});

it('gives the same outputs from a part as from the whole', () => {
  const x = noise(usual.inputLength(2000), 9);
  const whole = decimate(usual, x);
  for (const [from, count] of [
    [0, 1],
    [300, 1200],
    [1023, 2],
    [1999, 1],
  ] as const) {
    const part = decimate(usual, x.subarray(from * 16, from * 16 + usual.inputLength(count)));
    expect([...part]).toEqual([...whole.subarray(from, from + count)]);
  }
});

it('keeps a constant to 1e-12, and copies where the factor is 1', () => {
  const flat = new Float64Array(usual.inputLength(10)).fill(1);
  for (const v of decimate(usual, flat)) expect(Math.abs(v - 1)).toBeLessThan(1e-12);
  const one = planDecimation({ rateHz: 2560, factor: 1, fmaxHz: 1000, attenuationDb: 80 });
  const x = noise(20, 1);
  const copy = decimate(one, x);
  expect([...copy]).toEqual([...x]);
  expect(copy).not.toBe(x);
  expect([one.marginSamples, one.outputLength(20), one.inputLength(20), one.response(500)]).toEqual([
    0, 20, 20, 1,
  ]);
});

it('takes the cheaper order of stages', () => {
  const plan = planDecimation({ rateHz: 25_600, factor: 10, fmaxHz: 1000, attenuationDb: 80 });
  const orders = plan.stages.map((s) => s.factor);
  expect([...orders].sort()).toEqual([2, 5]);
  // Either order, by hand from the lengths of filters designed alone.
  const costOf = (order: number[]): number => {
    let rateHz = 25_600;
    let before = 1;
    return order.reduce((cost, p) => {
      const { stages } = planDecimation({ rateHz, factor: p, fmaxHz: 1000, attenuationDb: 80 });
      rateHz /= p;
      before *= p;
      return cost + stages[0]!.kernel.weights.length / before;
    }, 0);
  };
  expect(plan.cost).toBeCloseTo(Math.min(costOf([2, 5]), costOf([5, 2])), 12);
  expect(plan.cost).toBeCloseTo(costOf(orders), 12);
});

it('refuses what cannot be', () => {
  const base = { rateHz: 25_600, factor: 10, fmaxHz: 1000, attenuationDb: 80 };
  expect(() => planDecimation({ ...base, factor: 2.5 })).toThrow(/^factor is 2\.5/);
  expect(() => planDecimation({ ...base, factor: 13 })).toThrow(/^factor is 13: leaves 1969/);
  expect(() => planDecimation({ ...base, fmaxHz: -1 })).toThrow(/^fmaxHz/);
  expect(() => planDecimation({ ...base, rateHz: Number.NaN })).toThrow(/^rateHz/);
  expect(() => chooseFactor(2000, 1000)).toThrow(
    /^fmaxHz is 1000: needs to be at most rate \/ 2\.56, 781\.25 Hz/,
  );
  const plan = planDecimation(base);
  const short = new Float64Array(plan.inputLength(1) - 1);
  expect(() => decimate(plan, short)).toThrow(SignalRangeError);
  expect(plan.outputLength(short.length)).toBe(0);
  expect(plan.inputLength(0)).toBe(0);
});
