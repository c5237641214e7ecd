import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import {
  averagedSpectrum,
  bandBins,
  bandMeanSquare,
  effectiveAverages,
  lineAmplitude,
  lineAmplitudes,
  strongestBin,
} from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';
import { makeWindow, type WindowName } from '../../src/signal/window.ts';
import { naiveDft, noise, sine, sum } from './support.ts';

const windows: WindowName[] = ['rectangular', 'hann', 'flat-top'];
const total = (values: Float64Array) => values.reduce((a, b) => a + b, 0);

describe.each(windows)('with the %s window', (window) => {
  it('equals the definition, block by block', () => {
    const rateHz = 100;
    const blockSamples = 50;
    const x = noise(137, 3).map((v) => v + 5);
    const mean = total(x) / x.length;
    const w = makeWindow(window, blockSamples);
    const square = total(w.map((v) => v * v));
    const expected = new Float64Array(33);
    let averages = 0;
    for (let from = 0; from + blockSamples <= x.length; from += 25, averages++) {
      const padded = new Float64Array(64);
      for (let i = 0; i < blockSamples; i++) padded[i] = (x[from + i]! - mean) * w[i]!;
      naiveDft(padded).forEach(({ re, im }, k) => {
        expected[Math.min(k, 64 - k)] = expected[Math.min(k, 64 - k)]! + (re * re + im * im) / (64 * square);
      });
    }
    const spectrum = averagedSpectrum(x, { rateHz, blockSamples, window });
    expect(spectrum).toMatchObject({
      averages,
      fftSize: 64,
      blockSamples,
      binHz: 100 / 64,
      lineHz: 2,
      window,
    });
    spectrum.meanSquare.forEach((v, k) => {
      expect(v).toBeCloseTo(expected[k]! / averages, 13);
    });
  });

  it('holds the mean square of a sine as a whole and its amplitude on the line', () => {
    for (const blockSamples of [1024, 1000]) {
      const rateHz = blockSamples; // lines 1 Hz apart
      const x = sine(4 * blockSamples, { rateHz, hz: 100, amplitude: 3, phase: 1 });
      const spectrum = averagedSpectrum(x, { rateHz, blockSamples, window });
      expect(total(spectrum.meanSquare)).toBeCloseTo(4.5, 6);
      const bin = strongestBin(spectrum, [90, 110])!;
      const line = lineAmplitude(spectrum, bin);
      expect(line.hz).toBeCloseTo(100, 3);
      // What the mirror image at −100 Hz leaks in under a rectangular window: 1/(π·200) at the most.
      expect(Math.abs(line.amplitude - 3)).toBeLessThan(window === 'rectangular' ? 5e-3 : 1e-5);
      if (blockSamples === 1024) expect(lineAmplitudes(spectrum)[100]).toBeCloseTo(3, 8);
    }
  });

  it('finds a line between the bins, its place and its height', () => {
    // A rectangular window leaks the mirror image at −50 Hz in: 1/(100π) of the amplitude.
    const worst = window === 'rectangular' ? { hz: 0.03, amplitude: 0.03 } : { hz: 2e-4, amplitude: 1e-4 };
    for (let offset = -0.5; offset <= 0.5; offset += 0.07) {
      const hz = 50 + offset;
      const x = sine(4096, { rateHz: 1024, hz, amplitude: 3, phase: 0.3 });
      const spectrum = averagedSpectrum(x, { rateHz: 1024, blockSamples: 1024, window });
      const line = lineAmplitude(spectrum, strongestBin(spectrum, [40, 60])!);
      expect(Math.abs(line.hz - hz), `at ${hz} Hz`).toBeLessThan(worst.hz);
      expect(Math.abs(line.amplitude - 3), `at ${hz} Hz`).toBeLessThan(worst.amplitude);
    }
  });

  it('reads noise true: the density integrates to the mean square, the band to its share', () => {
    const x = noise(200_000, 8);
    const spectrum = averagedSpectrum(x, { rateHz: 1000, blockSamples: 1000, window });
    const { rms } = statistics(x);
    // Random error of a band of B Hz over T s is 1/√(BT) (Bendat and Piersol, from memory): 0.3 % and 0.7 %; three times that.
    expect(Math.abs(total(spectrum.meanSquare) / rms ** 2 - 1)).toBeLessThan(0.01);
    // Bins of 1 Hz: those of the band, and 1, 1 and 4 that its reach touches at each side.
    const bins = 101 + 2 * { rectangular: 1, hann: 1, 'flat-top': 4 }[window];
    expect(Math.abs((bandMeanSquare(spectrum, [100, 200]) * 500) / bins - 1)).toBeLessThan(0.02);
  });
});

it('gives the worked example of the line between bins', () => {
  const x = sine(4096, { rateHz: 1024, hz: 50.3, amplitude: 3 });
  const spectrum = averagedSpectrum(x, { rateHz: 1024, blockSamples: 1024, window: 'hann' });
  const line = lineAmplitude(spectrum, 50);
  expect(line.hz).toBeCloseTo(50.3, 3);
  expect(line.amplitude).toBeCloseTo(3, 3);
});

describe('bands', () => {
  const rateHz = 1024;
  const spectrumOf = (hz: number, window: WindowName = 'hann') =>
    averagedSpectrum(sine(8192, { rateHz, hz, phase: 0.2 }), { rateHz, blockSamples: 1024, window });

  it('reach 1.5 lines outward for Hann', () => {
    expect(bandBins(spectrumOf(50), [10, 20])).toEqual([9, 21]);
    expect(bandBins(spectrumOf(50), [0, 2000])).toEqual([0, 512]);
    // 3.75 and 0.75 lines: every bin that the reach touches counts.
    expect(bandBins(spectrumOf(50, 'flat-top'), [10, 20])).toEqual([6, 24]);
    expect(bandBins(spectrumOf(50, 'rectangular'), [10, 20])).toEqual([9, 21]);
  });

  it('hold a tone on their edge whole, wherever it stands between the lines', () => {
    // Less than 1 % of a Hann line lies beyond 1.5 lines at one side, so less than 0.5 % of RMS.
    for (const hz of [40, 40.2, 40.5, 40.7, 60]) {
      const rms = Math.sqrt(2 * bandMeanSquare(spectrumOf(hz), [hz, hz + 20]));
      expect(rms, `${hz} Hz at the lower edge`).toBeGreaterThan(0.995);
      expect(rms).toBeLessThan(1.0001);
      expect(Math.sqrt(2 * bandMeanSquare(spectrumOf(hz), [hz - 20, hz]))).toBeGreaterThan(0.995);
    }
  });

  it.each([600, 700, 868, 1000])(
    'hold it as whole where blocks of %d samples are padded to 1024',
    (blockSamples) => {
      for (const hz of [40, 40.2, 40.5, 40.7, 60]) {
        const x = sine(8192, { rateHz, hz, phase: 0.2 });
        const spectrum = averagedSpectrum(x, { rateHz, blockSamples, window: 'hann' });
        for (const band of [
          [hz, hz + 20],
          [hz - 20, hz],
        ] as const) {
          const rms = Math.sqrt(2 * bandMeanSquare(spectrum, band));
          expect(Math.abs(rms - 1), `${hz} Hz on an edge of ${band.join('-')}`).toBeLessThan(0.0025);
        }
      }
    },
  );

  it('hold next to nothing of a tone five lines outside', () => {
    expect(bandMeanSquare(spectrumOf(35), [40, 60])).toBeLessThan(1e-6);
  });

  it.each([1024, 700])('share their edges with their neighbours, blocks of %d samples', (blockSamples) => {
    const x = noise(200_000, 5);
    const spectrum = averagedSpectrum(x, { rateHz, blockSamples, window: 'hann' });
    const shared = (low: number, high: number) => bandMeanSquare(spectrum, [low, high], { edges: 'shared' });
    const all = shared(0, 512);
    expect(all).toBeCloseTo(total(spectrum.meanSquare), 9);
    expect(shared(0, 7.3) + shared(7.3, 7.4) + shared(7.4, 40.5) + shared(40.5, 512)).toBeCloseTo(all, 9);
    expect(shared(600, 700)).toBe(0);
    // White noise: by the width of the band. Random error 1/√(BT) (Bendat and Piersol, from memory): 2.9 %; twice that.
    expect(Math.abs(((shared(40.2, 46.3) / all) * 512) / 6.1 - 1)).toBeLessThan(0.058);
    // A tone on the edge: half of it at each side.
    expect(bandMeanSquare(spectrumOf(40), [40, 60], { edges: 'shared' })).toBeCloseTo(0.25, 3);
    expect(bandMeanSquare(spectrumOf(40), [20, 40], { edges: 'shared' })).toBeCloseTo(0.25, 3);
  });

  it('weigh each bin, and are 0 beyond the spectrum', () => {
    const spectrum = spectrumOf(50);
    const weight = new Float64Array(spectrum.meanSquare.length).fill(2);
    expect(bandMeanSquare(spectrum, [40, 60], { weight })).toBeCloseTo(1, 9);
    expect(bandMeanSquare(spectrum, [600, 700])).toBe(0);
    expect(() => bandMeanSquare(spectrum, [40, 60], { weight: new Float64Array(3) })).toThrow(
      /^weight\.length is 3/,
    );
    expect(() => bandMeanSquare(spectrum, [60, 40])).toThrow(SignalRangeError);
  });
});

it('scales with the square of the signal and ignores its offset', () => {
  fc.assert(
    fc.property(
      fc.double({ min: 0.01, max: 100, noNaN: true }),
      fc.double({ min: -100, max: 100, noNaN: true }),
      fc.constantFrom(...windows),
      (factor, offset, window) => {
        const x = noise(700, 4);
        const options = { rateHz: 100, blockSamples: 128, window };
        const plain = averagedSpectrum(x, options).meanSquare;
        const scaled = averagedSpectrum(
          x.map((v) => factor * v + offset),
          options,
        ).meanSquare;
        plain.forEach((v, k) => {
          // The offset costs digits in proportion to its share of the signal.
          expect(Math.abs(scaled[k]! / factor ** 2 - v)).toBeLessThan(
            1e-10 * (1 + Math.abs(offset) / factor),
          );
        });
      },
    ),
    { seed: 41, numRuns: 40 },
  );
});

it('uses all half-overlapped blocks that fit', () => {
  const count = (n: number, overlap?: number) =>
    averagedSpectrum(noise(n, 1), {
      rateHz: 1,
      blockSamples: 100,
      window: 'hann',
      ...(overlap === undefined ? {} : { overlap }),
    }).averages;
  expect([count(100), count(149), count(150), count(250), count(250, 0), count(250, 0.75)]).toEqual([
    1, 1, 2, 4, 2, 7,
  ]);
});

// Welch 1967 for a Hann window; figures computed from the published formula.
it.each([
  [10, 0.5, 9.5238, 3],
  [100, 0.5, 94.787, 3],
  [10, 0.75, 5.475, 3],
  [100, 0.75, 52.224, 2],
])('%d blocks at overlap %f are worth %f', (averages, overlap, worth, digits) => {
  expect(effectiveAverages('hann', averages, overlap)).toBeCloseTo(worth, digits);
});

it('spreads the averaged power of noise as Welch says', () => {
  // Relative deviation of one bin is 1/√(effective averages); over 400 independent bins it is known to about 4 %.
  const spectrum = averagedSpectrum(noise(1024 * 20, 6), { rateHz: 1, blockSamples: 1024, window: 'hann' });
  const bins = spectrum.meanSquare.slice(10, 500).filter((_, k) => k % 2 === 0);
  const { mean, rms } = statistics(bins);
  expect(rms / mean / (1 / Math.sqrt(effectiveAverages('hann', spectrum.averages)))).toBeCloseTo(1, 0.5);
});

it('finds the strongest inner bin of a band, or none', () => {
  const x = sum(sine(1024, { rateHz: 1024, hz: 40 }), sine(1024, { rateHz: 1024, hz: 80, amplitude: 2 }));
  const spectrum = averagedSpectrum(x, { rateHz: 1024, blockSamples: 1024, window: 'hann' });
  expect(strongestBin(spectrum, [30, 60])).toBe(40);
  expect(strongestBin(spectrum, [30, 90])).toBe(80);
  expect(strongestBin(spectrum, [50.1, 50.9])).toBeNull();
  const still = averagedSpectrum(new Float64Array(64).fill(3), {
    rateHz: 64,
    blockSamples: 64,
    window: 'hann',
  });
  expect(strongestBin(still, [0, 32])).toBeNull();
  expect(lineAmplitude(still, 5)).toEqual({ hz: 5, amplitude: 0 });
});

it('refuses what it cannot do', () => {
  const options = { rateHz: 100, blockSamples: 64, window: 'hann' as const };
  expect(() => averagedSpectrum(new Float64Array(63), options)).toThrow(
    /^x\.length is 63: needs at least one block/,
  );
  expect(() => averagedSpectrum(new Float64Array(64), { ...options, overlap: 1 })).toThrow(/^overlap/);
  expect(() => averagedSpectrum(new Float64Array(64), { ...options, rateHz: 0 })).toThrow(/^rateHz/);
  expect(() => averagedSpectrum(new Float64Array(64), { ...options, blockSamples: 10.5 })).toThrow(
    /^blockSamples/,
  );
  const spectrum = averagedSpectrum(noise(64, 1), options);
  for (const bin of [0, 32, 1.5, -1]) expect(() => lineAmplitude(spectrum, bin)).toThrow(SignalRangeError);
  expect(() => effectiveAverages('hann', 0)).toThrow(SignalRangeError);
});
