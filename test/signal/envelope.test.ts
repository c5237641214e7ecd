import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { bandEnvelope, complexBand, recordTransform, squaredEnvelope } from '../../src/signal/envelope.ts';
import { kurtogram } from '../../src/signal/kurtogram.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { averagedSpectrum, lineAmplitude, strongestBin } from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';
import { seeded } from '../support/seeded.ts';
import { noise, sine, sum } from './support.ts';

const rateHz = 40_960;

function modulated(
  n: number,
  options: { readonly carrierHz: number; readonly hz: number; readonly depth: number },
) {
  const carrier = sine(n, { rateHz, hz: options.carrierHz });
  const modulation = sine(n, { rateHz, hz: options.hz, phase: Math.PI / 2 });
  return carrier.map((v, i) => v * (1 + options.depth * modulation[i]!));
}

describe('squared envelope', () => {
  it('of a sine of amplitude A is A², and its offset is no part of it', () => {
    const x = sine(rateHz, { rateHz, hz: 3000, amplitude: 3 }).map((v) => v + 50);
    for (const fmaxHz of [200, 5000]) {
      const { values } = squaredEnvelope(x, { rateHz, bandHz: [2000, 5000], fmaxHz });
      // What the faded ends of the record ring through the band, 50 ms on.
      for (const v of values) expect(Math.abs(v - 9)).toBeLessThan(1e-4);
    }
  });

  // Identity: (1 + m·cos)² = 1 + m²/2 + 2m·cos + m²/2·cos 2.
  it('of an amplitude-modulated carrier has DC 1 + m²/2 and lines 2m and m²/2', () => {
    const x = modulated(8 * rateHz, { carrierHz: 5000, hz: 88, depth: 0.5 });
    const envelope = squaredEnvelope(x, { rateHz, bandHz: [500, 16_000], fmaxHz: 500 });
    const spectrum = averagedSpectrum(envelope.values, {
      rateHz: envelope.rateHz,
      blockSamples: Math.round(2 * envelope.rateHz),
      window: 'hann',
    });
    const at = (hz: number) => lineAmplitude(spectrum, strongestBin(spectrum, [hz - 5, hz + 5])!);
    expect(statistics(envelope.values).mean).toBeCloseTo(1.125, 3);
    expect(at(88).amplitude).toBeCloseTo(1, 4);
    expect(at(88).hz).toBeCloseTo(88, 3);
    expect(at(176).amplitude).toBeCloseTo(0.125, 4);
  });

  it('is the modulus of the analytic signal of the band, as the definition gives it', () => {
    const n = 512;
    const x = noise(n, 3);
    const mean = x.reduce((a, b) => a + b) / n;
    const [first, last] = [40, 99];
    const { values, firstAt } = squaredEnvelope(x, {
      rateHz: n,
      bandHz: [first, last],
      cutS: 0,
      fmaxHz: 120,
    });
    const step = n / values.length;
    expect([firstAt, step]).toEqual([0, 4]);
    values.forEach((v, i) => {
      let re = 0;
      let im = 0;
      for (let k = first; k <= last; k++) {
        for (let j = 0; j < n; j++) {
          const angle = (2 * Math.PI * ((k * (i * step - j + n)) % n)) / n;
          re += (2 / n) * (x[j]! - mean) * Math.cos(angle);
          im += (2 / n) * (x[j]! - mean) * Math.sin(angle);
        }
      }
      expect(v).toBeCloseTo(re * re + im * im, 9);
    });
  });

  it('does not depend on how finely it is sampled', () => {
    const transform = recordTransform(noise(50_000, 7), { rateHz });
    const coarse = bandEnvelope(transform, { bandHz: [2000, 4000], fmaxHz: 300 });
    const fine = bandEnvelope(transform, { bandHz: [2000, 4000], fmaxHz: 20_000 });
    const ratio = fine.rateHz / coarse.rateHz;
    expect(ratio).toBeGreaterThan(1);
    const shift = (coarse.firstAt - fine.firstAt) / (rateHz / fine.rateHz);
    for (let i = 0; i < coarse.values.length; i++) {
      expect(coarse.values[i]).toBeCloseTo(fine.values[i * ratio + shift]!, 10);
    }
  });

  it('folds nothing into the envelope frequencies asked for', () => {
    // Two tones at the ends of the band beat at its width, which must not fold below fmax.
    const fmaxHz = 400;
    fc.assert(
      fc.property(fc.integer({ min: 1000, max: 4000 }), fc.integer({ min: 700, max: 9000 }), (low, width) => {
        const x = sum(sine(rateHz, { rateHz, hz: low + 60 }), sine(rateHz, { rateHz, hz: low + width - 60 }));
        const envelope = squaredEnvelope(x, { rateHz, bandHz: [low, low + width], fmaxHz });
        expect(envelope.rateHz).toBeGreaterThanOrEqual(width + fmaxHz - 5);
        const spectrum = averagedSpectrum(envelope.values, {
          rateHz: envelope.rateHz,
          blockSamples: Math.round(envelope.rateHz / 2),
          window: 'hann',
        });
        // Beat amplitude is 2; what is left in 20..400 Hz is what the edges of the band ring.
        const found = lineAmplitude(spectrum, strongestBin(spectrum, [20, fmaxHz])!);
        expect(found.amplitude).toBeLessThan(1e-3);
      }),
      { seed: 71, numRuns: 30 },
    );
  });

  it('joins the pieces of a long record without a seam', () => {
    // 3 s are several pieces; a constant modulus shows any seam.
    const x = sine(3 * rateHz, { rateHz, hz: 6001.3, amplitude: 2 });
    const transform = recordTransform(x, { rateHz });
    expect(transform.pieces.length).toBeGreaterThan(3);
    const { values, firstAt, rateHz: outHz } = bandEnvelope(transform, { bandHz: [3000, 9000], fmaxHz: 500 });
    expect(values.length).toBe(
      Math.floor(((x.length - 1 - transform.cutSamples) * outHz) / rateHz) - (firstAt * outHz) / rateHz + 1,
    );
    for (const v of values) expect(Math.abs(v - 4)).toBeLessThan(1e-4);
    // And the phase of a modulation runs on: the line is as sharp as in a short record.
    const long = bandEnvelope(
      recordTransform(modulated(6 * rateHz, { carrierHz: 6000, hz: 90, depth: 0.4 }), { rateHz }),
      { bandHz: [3000, 9000], fmaxHz: 500 },
    );
    const spectrum = averagedSpectrum(long.values, {
      rateHz: long.rateHz,
      blockSamples: Math.round(5 * long.rateHz),
      window: 'hann',
    });
    const line = lineAmplitude(spectrum, strongestBin(spectrum, [80, 100])!);
    expect(line.hz).toBeCloseTo(90, 3);
    expect(line.amplitude).toBeCloseTo(0.8, 3);
  });

  it('cuts 10 s at 40 960 Hz into 15 pieces of 32 768 samples, and a short record into one', () => {
    const { pieces, size } = recordTransform(noise(10 * rateHz, 1), { rateHz });
    expect([pieces.length, size]).toEqual([15, 32_768]);
    const short = recordTransform(noise(9000, 1), { rateHz });
    expect([short.pieces.length, short.size]).toEqual([1, 16_384]);
  });

  it('states the band it used and where its first value stands', () => {
    const envelope = squaredEnvelope(noise(40_000, 1), {
      rateHz,
      bandHz: [500, 16_000],
      fmaxHz: 500,
      cutS: 0.02,
    });
    expect(envelope.bandHz[0]).toBeCloseTo(500, 0);
    expect(envelope.bandHz[1]).toBeCloseTo(16_000, 0);
    expect(envelope.bandHz[0]).toBeGreaterThanOrEqual(500);
    expect(envelope.bandHz[1]).toBeLessThanOrEqual(16_000);
    expect(envelope.firstAt / rateHz).toBeCloseTo(0.02, 3);
  });

  it('refuses a band that is not there and a record that is all ends', () => {
    const x = noise(8192, 2);
    for (const bandHz of [
      [5000, 4000],
      [-1, 100],
      [100, 30_000],
      [100, 100.5],
      [Number.NaN, 5],
    ] as const) {
      expect(() => squaredEnvelope(x, { rateHz, bandHz })).toThrow(SignalRangeError);
    }
    expect(() => recordTransform(noise(4000, 1), { rateHz })).toThrow(/^x\.length is 4000: needs 4112/);
    expect(() => recordTransform(x, { rateHz, cutS: -1 })).toThrow(SignalRangeError);
  });
});

describe('spectral kurtosis (Antoni 2007: 0 for complex Gaussian, −1 for constant modulus)', () => {
  const gaussian = recordTransform(noise(4 * rateHz, 21), { rateHz });

  it('is near 0 in every band of Gaussian noise', () => {
    const { table } = kurtogram(gaussian, { minHz: 0, maxLevel: 4 });
    // E|c|⁴ of n samples is off by about √(20/n) of 2; bands here have n ≥ 10 000: four times that.
    for (const { kurtosis, bandHz } of table) expect(Math.abs(kurtosis), `${bandHz}`).toBeLessThan(0.2);
  });

  it('is −1 for a lone sine', () => {
    const transform = recordTransform(sine(2 * rateHz, { rateHz, hz: 3101 }), { rateHz });
    const { table } = kurtogram(transform, { minHz: 2560, maxHz: 5120, maxLevel: 3 });
    expect(table.find((b) => b.level === 3)!.kurtosis).toBeCloseTo(-1, 4);
  });

  it('tries levels 0, 1, 1.6, 2, 2.6 … with 2^k and 3·2^(k−1) bands', () => {
    const { table } = kurtogram(gaussian, { minHz: 0, maxLevel: 3 });
    const count = (level: number) => table.filter((b) => b.level === level).length;
    expect([0, 1, 1.6, 2, 2.6, 3, 3.6].map(count)).toEqual([1, 2, 3, 4, 6, 8, 12]);
    expect(table.find((b) => b.level === 1.6)!.bandHz[1]).toBeCloseTo(rateHz / 6, 9);
  });

  it('finds the resonance that rings under noise', () => {
    // Impulses at 90 Hz ringing at 7 kHz, damping 2000 1/s, in noise of the whole band.
    const next = seeded(5);
    const x = noise(4 * rateHz, 22).map((v) => 0.3 * v);
    for (let at = 100; at < x.length - 400; at += Math.round((rateHz / 90) * (1 + 0.01 * (next() - 0.5)))) {
      for (let i = 0; i < 400; i++) {
        x[at + i] =
          x[at + i]! + 2 * Math.exp((-2000 * i) / rateHz) * Math.sin((2 * Math.PI * 7000 * i) / rateHz);
      }
    }
    const { best, table } = kurtogram(recordTransform(x, { rateHz }), {
      minHz: 500,
      maxHz: 16_000,
      maxLevel: 5,
    });
    expect(best.bandHz[0]).toBeLessThan(7000);
    expect(best.bandHz[1]).toBeGreaterThan(7000);
    expect(best.kurtosis).toBeGreaterThan(1);
    expect(best.kurtosis).toBe(Math.max(...table.map((b) => b.kurtosis)));
    for (const { bandHz } of table) {
      expect(bandHz[0]).toBeGreaterThanOrEqual(500);
      expect(bandHz[1]).toBeLessThanOrEqual(16_000);
    }
  });

  it('refuses a range without a band and a tree too deep', () => {
    expect(() => kurtogram(gaussian, { minHz: 19_000, maxLevel: 2 })).toThrow(
      /^minHz is 19000: leaves no band/,
    );
    expect(() => kurtogram(gaussian, { minHz: 0, maxLevel: 9 })).toThrow(SignalRangeError);
    const still = recordTransform(new Float64Array(rateHz).fill(2), { rateHz });
    expect(() => kurtogram(still, { minHz: 0, maxLevel: 2 })).toThrow(SignalRangeError);
  });
});

it('keeps phase and amplitude in the complex band', () => {
  const x = sine(rateHz, { rateHz, hz: 4000, amplitude: 3, phase: 0.7 });
  const band = complexBand(recordTransform(x, { rateHz }), { bandHz: [3000, 6000], fmaxHz: 500 });
  const modulus = Float64Array.from({ length: band.values.length / 2 }, (_, i) =>
    Math.hypot(band.values[2 * i]!, band.values[2 * i + 1]!),
  );
  for (const v of modulus) expect(Math.abs(v - 3)).toBeLessThan(1e-4);
});
