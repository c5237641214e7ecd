/**
 * Figures of the signal room against values from outside of the project, one entry a check. `measure` goes through the
 * functions that measure in the field, never through a formula of its own.
 */
import { chooseFactor, decimate, planDecimation } from '../../src/signal/decimate.ts';
import { recordTransform, squaredEnvelope } from '../../src/signal/envelope.ts';
import {
  type AccelerationUnit,
  displacementWaveform,
  displacementWeights,
  velocityWeights,
} from '../../src/signal/integrate.ts';
import { filterGain, kaiserBeta, kaiserTaps, windowedLowpass } from '../../src/signal/kaiser.ts';
import { kurtogram } from '../../src/signal/kurtogram.ts';
import {
  averagedSpectrum,
  bandMeanSquare,
  effectiveAverages,
  lineAmplitude,
  type Spectrum,
  strongestBin,
} from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';
import {
  coherentGain,
  enbwBins,
  makeWindow,
  type WindowName,
  windowResponse,
} from '../../src/signal/window.ts';
import { decibels, noise, sine } from '../signal/support.ts';
import { velocityResponse } from './velocity-response.ts';

export interface OutsideCheck {
  readonly id: string;
  readonly source: string;
  /**
   * seen: read in a public page. repro: read in a reproduction of a paywalled standard or paper, copies agreeing.
   * computed: by a general-purpose library or by arithmetic from the source. memory: known, not seen. practice: common
   * practice, no source.
   */
  readonly status: 'seen' | 'repro' | 'computed' | 'memory' | 'practice';
  readonly value: number;
  /** Largest difference from `value` that passes, in the same unit. */
  readonly tolerance: number;
  readonly unit: string;
  readonly measure: () => number;
}

export interface CheckResult {
  readonly measured: number;
  readonly passed: boolean;
  /** One line for a person. */
  readonly line: string;
}

export function runCheck(check: OutsideCheck): CheckResult {
  const measured = check.measure();
  const passed = Math.abs(measured - check.value) <= check.tolerance;
  const unit = check.unit === '' ? '' : ` ${check.unit}`;
  const figures = `${short(measured)}${unit}, expected ${short(check.value)} ± ${short(check.tolerance)}`;
  return {
    measured,
    passed,
    line: `${passed ? 'ok  ' : 'FAIL'} ${check.id}: ${figures} (${check.source}; ${check.status})`,
  };
}

function short(value: number): string {
  return Number.isInteger(value) ? String(value) : String(Number(value.toPrecision(7)));
}

const RATE_HZ = 40_960;
const BLOCK = 8192; // T = 3.2 s: 3200 lines to 1000 Hz
const decimation = planDecimation({ rateHz: RATE_HZ, factor: 16, fmaxHz: 1000, attenuationDb: 80 });

/** What a point would see of one tone: raw samples, decimated, averaged. */
function spectrumOfTone(hz: number, accelerationPeak: number): Spectrum {
  const n = decimation.inputLength(2.5 * BLOCK);
  const raw = sine(n, { rateHz: RATE_HZ, hz, amplitude: accelerationPeak, phase: 0.7 });
  return averagedSpectrum(decimate(decimation, raw), { rateHz: 2560, blockSamples: BLOCK, window: 'hann' });
}

function velocityMmS(hz: number, accelerationPeak: number, unit: AccelerationUnit): number {
  const spectrum = spectrumOfTone(hz, accelerationPeak);
  return Math.sqrt(bandMeanSquare(spectrum, [10, 1000], { weight: velocityWeights(spectrum, unit) }));
}

function displacementUm(hz: number, accelerationPeak: number, unit: AccelerationUnit): number {
  const spectrum = spectrumOfTone(hz, accelerationPeak);
  return Math.sqrt(bandMeanSquare(spectrum, [10, 1000], { weight: displacementWeights(spectrum, unit) }));
}

/** Peak acceleration in m/s² of a tone of so many mm/s RMS. */
function accelerationOf(velocityRmsMmS: number, hz: number): number {
  return (velocityRmsMmS / 1000) * Math.SQRT2 * 2 * Math.PI * hz;
}

const windowTable: [WindowName, number, number, number, number, number][] = [
  // gain, bandwidth, scalloping, effective averages of 10 blocks at 50 % and their tolerance
  ['rectangular', 1, 1, -3.9224, 10 / (1 + 2 * 0.9 * 0.5 ** 2), 1e-3],
  ['hann', 0.5, 1.5, -1.4236, 9.5238, 1e-3],
  ['flat-top', 1, 3.7709, -0.009, 10 / (1 + 2 * 0.9 * 0.015 ** 2), 1e-3],
];

const windowChecks = windowTable.flatMap(
  ([name, gain, bandwidth, scallopDb, worth, worthTolerance]): OutsideCheck[] => {
    const source =
      name === 'flat-top' ? 'ISO 18431-2:2004 coefficients' : 'Harris 1978, Proc. IEEE 66(1), Table I';
    const row = { source, status: name === 'flat-top' ? ('repro' as const) : ('memory' as const) };
    const window = makeWindow(name, 4096);
    return [
      {
        ...row,
        id: `window.${name}.gain`,
        value: gain,
        tolerance: 1e-4,
        unit: '',
        measure: () => coherentGain(window),
      },
      {
        ...row,
        id: `window.${name}.bandwidth`,
        value: bandwidth,
        tolerance: 1e-4,
        unit: 'lines',
        measure: () => enbwBins(window),
      },
      {
        ...row,
        id: `window.${name}.scalloping`,
        value: scallopDb,
        tolerance: 1e-4,
        unit: 'dB',
        measure: () => decibels(windowResponse(name, 0.5)),
      },
      {
        id: `averaging.${name}.ten-blocks`,
        source: 'Welch 1967, IEEE Trans. Audio Electroacoust. AU-15(2)',
        status: 'computed',
        value: worth,
        tolerance: worthTolerance,
        unit: 'averages',
        measure: () => effectiveAverages(name, 10),
      },
      {
        ...row,
        id: `window.${name}.noise-in-a-band`,
        source: 'white noise of deviation 1 has 1/5 of its power in a fifth of its band (identity)',
        status: 'computed',
        value: Math.sqrt(0.2),
        // Random error of 256 Hz over 160 s is 0.25 % of RMS, the band's reach 0.2 to 0.7 %.
        tolerance: 0.006,
        unit: '',
        measure: () => {
          const spectrum = averagedSpectrum(noise(2560 * 160, 40), {
            rateHz: 2560,
            blockSamples: BLOCK,
            window: name,
          });
          return Math.sqrt(bandMeanSquare(spectrum, [300, 556]));
        },
      },
      {
        ...row,
        id: `window.${name}.line-height`,
        source: 'a sine of amplitude 3 has a line of height 3 (identity)',
        status: 'computed',
        value: 3,
        tolerance: name === 'rectangular' ? 3e-3 : 1e-5,
        unit: '',
        measure: () => {
          const x = sine(4 * BLOCK, { rateHz: 2560, hz: 200.1, amplitude: 3 });
          const spectrum = averagedSpectrum(x, { rateHz: 2560, blockSamples: BLOCK, window: name });
          return lineAmplitude(spectrum, strongestBin(spectrum, [190, 210])!).amplitude;
        },
      },
    ];
  },
);

const KAISER = 'Oppenheim and Schafer, Kaiser window design';
const betaTable: [number, number, 'seen' | 'computed'][] = [
  [40, 3.3953210523, 'computed'],
  [50, 4.533514121, 'computed'],
  [65, 6.20426, 'seen'],
  [80, 7.85726, 'computed'],
];

const kaiserChecks: OutsideCheck[] = [
  ...betaTable.map(
    ([attenuationDb, beta, status]): OutsideCheck => ({
      id: `kaiser.beta.${attenuationDb}-db`,
      source: KAISER,
      status,
      value: beta,
      tolerance: 1e-9,
      unit: '',
      measure: () => kaiserBeta(attenuationDb),
    }),
  ),
  ...(
    [
      [2500, 3900, 93, -78.79],
      [1000, 1560, 231, -79.25],
    ] as const
  ).flatMap(([passHz, stopHz, taps, stopDb]): OutsideCheck[] => {
    const options = { rateHz: 25_600, passHz, stopHz, attenuationDb: 80 };
    return [
      {
        id: `kaiser.taps.${passHz}-to-${stopHz}-hz`,
        source: KAISER,
        status: 'computed',
        value: taps,
        tolerance: 0,
        unit: 'taps',
        measure: () => kaiserTaps(options),
      },
      {
        id: `kaiser.stop-band.${passHz}-to-${stopHz}-hz`,
        source: KAISER,
        status: 'computed',
        value: stopDb,
        tolerance: 0.01,
        unit: 'dB',
        measure: () => {
          const designed = windowedLowpass(
            kaiserTaps(options),
            (passHz + stopHz) / 2,
            25_600,
            kaiserBeta(80),
          );
          let worst = 0;
          for (let f = stopHz; f <= 12_800; f += 0.5)
            worst = Math.max(worst, Math.abs(filterGain(designed, 25_600, f)));
          return decibels(worst);
        },
      },
    ];
  }),
  {
    id: 'kaiser.eleven-taps.middle',
    source: 'scipy.signal.firwin(11, 0.5, window=("kaiser", 4.533514120981))',
    status: 'computed',
    value: 0.501200163307,
    tolerance: 1e-11,
    unit: '',
    measure: () => windowedLowpass(11, 0.25, 1, 4.533514120981)[5]!,
  },
  {
    id: 'decimation.factor',
    source: 'rate at least 2.56 × Fmax',
    status: 'practice',
    value: 16,
    tolerance: 0,
    unit: '',
    measure: () => chooseFactor(RATE_HZ, 1000),
  },
];

const KINEMATICS = 'kinematics, g = 9.80665 m/s²';
const conversionChecks: OutsideCheck[] = [
  {
    id: 'conversion.10-hz-1-g.velocity',
    source: KINEMATICS,
    status: 'computed',
    value: 110.363587523,
    tolerance: 0.005,
    unit: 'mm/s rms',
    measure: () => velocityMmS(10, 1, 'g'),
  },
  {
    id: 'conversion.10-hz-1-g.velocity-line',
    source: KINEMATICS,
    status: 'computed',
    value: 156.077682267,
    tolerance: 0.005,
    unit: 'mm/s peak',
    measure: () => {
      const spectrum = spectrumOfTone(10, 1);
      const line = lineAmplitude(spectrum, strongestBin(spectrum, [5, 20])!);
      // The line's own share of the weights, free of their allowance for its spread.
      const scale = (Math.sqrt(velocityWeights(spectrum, 'g').at(-1)!) * spectrum.rateHz) / 2 / line.hz;
      return line.amplitude * scale;
    },
  },
  {
    id: 'conversion.10-hz-1-g.swing',
    source: KINEMATICS,
    status: 'computed',
    value: 4968.106928,
    tolerance: 1.5,
    unit: 'µm p-p',
    measure: () => {
      const options = { rateHz: 2560, bandHz: [10, 1000] as const, unit: 'g' as const };
      return statistics(displacementWaveform(sine(25_600, { rateHz: 2560, hz: 10 }), options)).peakToPeak;
    },
  },
  {
    id: 'conversion.159-hz.velocity',
    source: 'hand-held calibrators: 10 m/s² is 10 mm/s at 159.154943 Hz',
    status: 'practice',
    value: 10,
    tolerance: 0.01,
    unit: 'mm/s rms',
    measure: () => velocityMmS(159.154943, 10 * Math.SQRT2, 'm/s2'),
  },
  {
    id: 'conversion.159-hz.displacement',
    source: 'hand-held calibrators: 10 m/s² is 10 µm at 159.154943 Hz',
    status: 'practice',
    value: 10,
    tolerance: 0.01,
    unit: 'µm rms',
    measure: () => displacementUm(159.154943, 10 * Math.SQRT2, 'm/s2'),
  },
  {
    id: 'conversion.25-hz.velocity',
    source: KINEMATICS,
    status: 'computed',
    value: 4.5,
    tolerance: 0.0005,
    unit: 'mm/s rms',
    measure: () => velocityMmS(25, 0.706858347 * Math.SQRT2, 'm/s2'),
  },
  {
    id: 'conversion.25-hz.displacement',
    source: KINEMATICS,
    status: 'computed',
    value: 28.64789,
    tolerance: 0.003,
    unit: 'µm rms',
    measure: () => displacementUm(25, 0.706858347 * Math.SQRT2, 'm/s2'),
  },
  {
    id: 'conversion.inch-per-second',
    source: '1 in/s peak, 1 in = 25.4 mm',
    status: 'computed',
    value: 17.960512242,
    tolerance: 0.002,
    unit: 'mm/s rms',
    measure: () => velocityMmS(80, 0.0254 * 2 * Math.PI * 80, 'm/s2'),
  },
];

const responseChecks = velocityResponse('response', (hz) => velocityMmS(hz, accelerationOf(1, hz), 'm/s2'));

const averagingChecks = [1, 4, 16, 100].map(
  (blocks): OutsideCheck => ({
    id: `averaging.random-error.${blocks}`,
    source: 'Bendat and Piersol: 1/√n',
    status: 'memory',
    value: 1 / Math.sqrt(blocks),
    // Known from 4000 bins to 1/√8000, a little worse for few blocks: four times that.
    tolerance: 0.06 / Math.sqrt(blocks),
    unit: 'of the mean',
    measure: () => {
      const options = { rateHz: 1, blockSamples: 8192, window: 'rectangular' as const, overlap: 0 };
      const { meanSquare } = averagedSpectrum(noise(8192 * blocks, 50 + blocks), options);
      const { mean, rms } = statistics(meanSquare.subarray(20, 4020));
      return rms / mean;
    },
  }),
);

const quantisationChecks = [16, 24].map(
  (bits): OutsideCheck => ({
    id: `quantisation.${bits}-bit`,
    source: 'Bennett 1948: noise power q²/12, so 1.76 + 6.02·n dB',
    status: 'seen',
    value: bits === 16 ? 98.09 : 146.26,
    tolerance: 0.05,
    unit: 'dB',
    measure: () => {
      const exact = sine(200_000, { rateHz: 1, hz: 0.0123456789, amplitude: 2 ** (bits - 1) });
      const noise = statistics(exact.map((v) => Math.round(v) - v));
      return decibels(statistics(exact).rms / noise.rms);
    },
  }),
);

/** Mean, line at the modulation and line at twice it of the squared envelope of (1 + 0.5·cos)·carrier. */
function modulationLine(multiple: 0 | 1 | 2): number {
  const n = 8 * RATE_HZ;
  const modulation = sine(n, { rateHz: RATE_HZ, hz: 88, amplitude: 0.5, phase: Math.PI / 2 });
  const x = sine(n, { rateHz: RATE_HZ, hz: 5000 }).map((v, i) => v * (1 + modulation[i]!));
  const envelope = squaredEnvelope(x, { rateHz: RATE_HZ, bandHz: [500, 16_000], fmaxHz: 500 });
  if (multiple === 0) return statistics(envelope.values).mean;
  const blockSamples = Math.round(2 * envelope.rateHz);
  const spectrum = averagedSpectrum(envelope.values, {
    rateHz: envelope.rateHz,
    blockSamples,
    window: 'hann',
  });
  return lineAmplitude(spectrum, strongestBin(spectrum, [88 * multiple - 5, 88 * multiple + 5])!).amplitude;
}

const envelopeChecks = ([0, 1, 2] as const).map(
  (multiple): OutsideCheck => ({
    id: `envelope.modulation.${['mean', 'line', 'second-line'][multiple]}`,
    source: '(1 + m·cos)·carrier, m = 0.5: 1 + m²/2, 2m, m²/2 (identity)',
    status: 'computed',
    value: [1.125, 1, 0.125][multiple]!,
    tolerance: 1e-3,
    unit: '',
    measure: () => modulationLine(multiple),
  }),
);

const ANTONI = 'Antoni 2007, MSSP 21, 108–124';
const momentChecks: OutsideCheck[] = [
  {
    id: 'kurtosis.gaussian',
    source: 'fourth standardised moment of a Gaussian',
    status: 'computed',
    value: 3,
    tolerance: 0.04, // standard error √(24/n): 0.01
    unit: '',
    measure: () => statistics(noise(240_000, 60)).kurtosis!,
  },
  {
    id: 'kurtosis.sine',
    source: 'fourth standardised moment of a sine',
    status: 'computed',
    value: 1.5,
    tolerance: 1e-9,
    unit: '',
    measure: () => statistics(sine(10_000, { rateHz: 10_000, hz: 50 })).kurtosis!,
  },
  {
    id: 'crest.sine',
    source: 'peak over RMS of a sine',
    status: 'computed',
    value: Math.SQRT2,
    tolerance: 1e-9,
    unit: '',
    measure: () => statistics(sine(10_000, { rateHz: 10_000, hz: 50 })).crest!,
  },
  {
    id: 'spectral-kurtosis.noise',
    source: ANTONI,
    status: 'repro',
    value: 0,
    tolerance: 0.05, // standard error √(20/n) of two moments: about 0.01
    unit: '',
    measure: () =>
      kurtogram(recordTransform(noise(200_000, 61), { rateHz: RATE_HZ }), { minHz: 0, maxLevel: 0 }).best
        .kurtosis,
  },
  {
    id: 'spectral-kurtosis.sine',
    source: ANTONI,
    status: 'repro',
    value: -1,
    tolerance: 1e-3,
    unit: '',
    measure: () => {
      const transform = recordTransform(sine(40_960, { rateHz: RATE_HZ, hz: 7001 }), { rateHz: RATE_HZ });
      return kurtogram(transform, { minHz: 0, maxLevel: 0 }).best.kurtosis;
    },
  },
];

export const signalChecks: readonly OutsideCheck[] = [
  ...windowChecks,
  ...kaiserChecks,
  ...conversionChecks,
  ...responseChecks,
  ...averagingChecks,
  ...quantisationChecks,
  ...envelopeChecks,
  ...momentChecks,
];
