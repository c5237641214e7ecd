/** Compares the signal room with vectors of `make_vectors.py`, stored or fresh. */
import { expect } from 'vitest';
import { decimate, planDecimation } from '../../src/signal/decimate.ts';
import { bandEnvelope, recordTransform } from '../../src/signal/envelope.ts';
import { displacementWeights, velocityWeights } from '../../src/signal/integrate.ts';
import { kaiserBeta, kaiserTaps, kaiserWindow, windowedLowpass } from '../../src/signal/kaiser.ts';
import { kurtogram } from '../../src/signal/kurtogram.ts';
import { runningMedian } from '../../src/signal/peaks.ts';
import { averagedSpectrum, bandMeanSquare, lineAmplitudes } from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';
import { coherentGain, enbwBins, makeWindow, type WindowName } from '../../src/signal/window.ts';
import { sine, sum } from '../signal/support.ts';
import { seeded } from '../support/seeded.ts';

interface Recipe {
  samples: number;
  rateHz: number;
  seed: number;
  tones: [number, number][];
  offset?: number;
}

interface Band {
  hz: [number, number];
  rms: number;
  velocityMmS: number;
  displacementUm: number;
}

export interface Vectors {
  seed: number;
  numpy: string;
  scipy: string;
  windows: { name: WindowName; n: number; values: number[]; enbw: number; gain: number }[];
  kaiser: {
    betas: { attenuationDb: number; beta: number }[];
    designs: { n: number; beta: number; cutoffHz: number; taps: number[]; window: number[] }[];
    lengths: { rateHz: number; passHz: number; stopHz: number; attenuationDb: number; taps: number }[];
  };
  decimated: (Recipe & { fmaxHz: number; stages: { factor: number; taps: number[] }[]; values: number[] })[];
  spectra: (Recipe & {
    window: WindowName;
    blockSamples: number;
    meanSquare: number[];
    lines: number[];
    bands: Band[];
  })[];
  velocity: Recipe & { bandHz: [number, number]; velocityMmS: number };
  envelopes: (Recipe & { bandHz: [number, number]; at: number[]; values: number[] })[];
  spectralKurtosis: Recipe & { bands: { level: number; bandHz: [number, number]; kurtosis: number }[] };
  statistics: (Recipe & {
    mean: number;
    rms: number;
    peak: number;
    peakToPeak: number;
    kurtosis: number;
    skewness: number;
  })[];
  medians: Recipe & { halfWidth: number; inner: number[] };
}

/** Where only the order of roundings differs. */
const ROUNDING = 1e-9;

function recordOf({ samples, rateHz, seed, tones, offset = 0 }: Recipe): Float64Array {
  const next = seeded(seed);
  const noise = Float64Array.from({ length: samples }, () => next() - 0.5 + offset);
  return sum(noise, ...tones.map(([hz, amplitude]) => sine(samples, { rateHz, hz, amplitude })));
}

function expectClose(
  actual: ArrayLike<number>,
  reference: readonly number[],
  tolerance: number,
  what: string,
): void {
  expect(actual.length, what).toBe(reference.length);
  const scale = reference.reduce((most, v) => Math.max(most, Math.abs(v)), 0);
  let worst = 0;
  reference.forEach((v, i) => {
    // Math.max passes NaN on, and that fails.
    worst = Math.max(worst, Math.abs(actual[i]! - v));
  });
  expect(worst, what).toBeLessThanOrEqual(tolerance * scale);
}

export const comparisons: Record<string, (vectors: Vectors) => void> = {
  'windows, their gain and noise bandwidth': ({ windows }) => {
    for (const { name, n, values, enbw, gain } of windows) {
      const window = makeWindow(name, n);
      expectClose(window, values, 1e-14, `${name} of ${n}`);
      expectClose([enbwBins(window), coherentGain(window)], [enbw, gain], 1e-13, `${name} of ${n}`);
    }
  },

  'Kaiser designs': ({ kaiser }) => {
    for (const { attenuationDb, beta } of kaiser.betas) {
      expectClose([kaiserBeta(attenuationDb)], [beta], 1e-13, `β of ${attenuationDb} dB`);
    }
    for (const { n, beta, cutoffHz, taps, window } of kaiser.designs) {
      expectClose(
        windowedLowpass(n, cutoffHz, 1, beta),
        taps,
        1e-12,
        `${n} taps, β ${beta}, cut-off ${cutoffHz}`,
      );
      expectClose(kaiserWindow(n, beta), window, 1e-12, `window of ${n}, β ${beta}`);
    }
    for (const { taps, ...options } of kaiser.lengths) expect(kaiserTaps(options)).toBe(taps);
  },

  'decimated records, stage by stage': ({ decimated }) => {
    for (const { fmaxHz, stages, values, ...recipe } of decimated) {
      const factor = stages.reduce((product, s) => product * s.factor, 1);
      const plan = planDecimation({ rateHz: recipe.rateHz, factor, fmaxHz, attenuationDb: 80 });
      expect(plan.stages.map((s) => s.factor)).toEqual(stages.map((s) => s.factor));
      plan.stages.forEach(({ taps }, i) => {
        const half = taps.slice((taps.length - 1) / 2);
        const kept = half.findLastIndex((tap) => tap !== 0) + 1;
        expectClose(
          half.subarray(0, kept),
          stages[i]!.taps,
          1e-12,
          `${recipe.rateHz} Hz, taps of stage ${i}`,
        );
      });
      expectClose(decimate(plan, recordOf(recipe)), values, ROUNDING, `${recipe.rateHz} Hz by ${factor}`);
    }
  },

  'averaged spectra and band sums, velocity and displacement among them': ({ spectra }) => {
    for (const { window, blockSamples, meanSquare, lines, bands, ...recipe } of spectra) {
      const spectrum = averagedSpectrum(recordOf(recipe), { rateHz: recipe.rateHz, blockSamples, window });
      const what = `${window}, blocks of ${blockSamples}`;
      expectClose(spectrum.meanSquare, meanSquare, ROUNDING, what);
      // The mean square of a sine on the line, so half its amplitude squared; not at 0 Hz and half the rate.
      const squares = lineAmplitudes(spectrum).map((a) => (a * a) / 2);
      expectClose(squares.subarray(1, -1), lines.slice(1, -1), ROUNDING, what);
      for (const { hz, rms, velocityMmS, displacementUm } of bands) {
        const rootOf = (weight?: Float64Array) =>
          Math.sqrt(bandMeanSquare(spectrum, hz, weight ? { weight } : {}));
        const where = `${what}, ${hz.join('–')} Hz`;
        expectClose([rootOf()], [rms], ROUNDING, where);
        expectClose([rootOf(velocityWeights(spectrum, 'g'))], [velocityMmS], ROUNDING, where);
        expectClose([rootOf(displacementWeights(spectrum, 'g'))], [displacementUm], ROUNDING, where);
      }
    }
  },

  'velocity of a record integrated whole': ({ velocity: { bandHz, velocityMmS, ...recipe } }) => {
    const spectrum = averagedSpectrum(recordOf(recipe), {
      rateHz: recipe.rateHz,
      blockSamples: Math.round(3.2 * recipe.rateHz),
      window: 'hann',
    });
    const seen = Math.sqrt(bandMeanSquare(spectrum, bandHz, { weight: velocityWeights(spectrum, 'g') }));
    // Two tones carry nearly all of it; the noise within is weighed differently by windows and by the band's edges.
    expectClose([seen], [velocityMmS], 2e-3, 'velocity');
  },

  'squared envelopes by the Hilbert transform of the band': ({ envelopes }) => {
    for (const { bandHz, at, values, ...recipe } of envelopes) {
      const transform = recordTransform(recordOf(recipe), { rateHz: recipe.rateHz });
      const envelope = bandEnvelope(transform, { bandHz, fmaxHz: 500 });
      const ratio = recipe.rateHz / envelope.rateHz;
      const seen = at.map((index) => envelope.values[(index - envelope.firstAt) / ratio]!);
      // Cut into pieces, noise at the very edge of the band rings a little differently than in one transform.
      const tolerance = transform.pieces.length > 1 ? 1e-2 : ROUNDING;
      expectClose(seen, values, tolerance, `${recipe.rateHz} Hz, ${bandHz.join('–')} Hz`);
    }
  },

  'spectral kurtosis': ({ spectralKurtosis: { bands, ...recipe } }) => {
    const transform = recordTransform(recordOf(recipe), { rateHz: recipe.rateHz });
    const { table } = kurtogram(transform, { minHz: 0, maxLevel: 2 });
    const seen = bands.map(
      ({ level, bandHz }) =>
        table.find((b) => b.level === level && Math.abs(b.bandHz[0] - bandHz[0]) < 1e-6)!.kurtosis,
    );
    expectClose(
      seen,
      bands.map((b) => b.kurtosis),
      ROUNDING,
      'all bands',
    );
  },

  'statistics, kurtosis and skewness': ({ statistics: cases }) => {
    for (const { mean, rms, peak, peakToPeak, kurtosis, skewness, ...recipe } of cases) {
      const s = statistics(recordOf(recipe));
      expectClose(
        [s.mean, s.rms, s.peak, s.peakToPeak, s.crest!, s.kurtosis!, s.skewness!],
        [mean, rms, peak, peakToPeak, peak / rms, kurtosis, skewness],
        ROUNDING,
        `offset ${recipe.offset}`,
      );
    }
  },

  'sliding medians': ({ medians: { halfWidth, inner, ...recipe } }) => {
    const seen = runningMedian(recordOf(recipe), halfWidth).subarray(halfWidth, -halfWidth);
    expectClose(seen, inner, 1e-14, 'medians');
  },
};
