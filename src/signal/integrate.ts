import { inverseFft, nextPowerOfTwo, realFft } from './fft.ts';
import { requirePositive, SignalRangeError } from './range-error.ts';
import type { Spectrum } from './spectrum.ts';
import { lineSpreadBins2 } from './window.ts';

/** Standard gravity, m/s² (3rd CGPM, 1901). */
export const GRAVITY_M_S2 = 9.80665;

export type AccelerationUnit = 'g' | 'm/s2';

function metresPerSecond2(unit: AccelerationUnit): number {
  return unit === 'g' ? GRAVITY_M_S2 : 1;
}

/**
 * What turns each bin's mean square of acceleration into that of velocity in mm/s.
 *
 * The factor is (1000/2πf)², lessened by the spread of a line through the window: about a steeply falling factor the
 * lower half of a spread line weighs more than the upper half. With σ² the second moment of the window's transform
 * the mean of 1/f² over a line at f0 is 1/f0²·(1 + 3σ²/f0²), so 1/(f² + 3σ²) is used. For Hann at 32/T that is 0.05 % of RMS.
 *
 * @param spectrum Averaged spectrum of acceleration.
 * @param unit Unit of that acceleration.
 * @returns One factor a bin, (mm/s)² per unit²; 0 at 0 Hz.
 * @see Kinematics; 1 g = 9.80665 m/s².
 * @example 10 Hz at 1 g peak is 110.363587523 mm/s RMS.
 */
export function velocityWeights(spectrum: Spectrum, unit: AccelerationUnit): Float64Array {
  const spreadHz2 = lineSpreadBins2(spectrum.window) * spectrum.lineHz ** 2;
  const scale = ((1000 * metresPerSecond2(unit)) / (2 * Math.PI)) ** 2;
  return binWeights(spectrum, (f2) => scale / (f2 + 3 * spreadHz2));
}

/**
 * What turns each bin's mean square of acceleration into that of displacement in µm: (10⁶/(2πf)²)², lessened as in
 * `velocityWeights` (the mean of 1/f⁴ over a line is higher by 10σ²/f²).
 *
 * @param spectrum Averaged spectrum of acceleration.
 * @param unit Unit of that acceleration.
 * @returns One factor a bin, µm² per unit²; 0 at 0 Hz.
 * @see Kinematics; 1 g = 9.80665 m/s².
 * @example 10 Hz at 1 g peak is 4968.106928 µm peak to peak, so 1756.49 µm RMS.
 */
export function displacementWeights(spectrum: Spectrum, unit: AccelerationUnit): Float64Array {
  const spreadHz2 = lineSpreadBins2(spectrum.window) * spectrum.lineHz ** 2;
  const scale = ((1e6 * metresPerSecond2(unit)) / (2 * Math.PI) ** 2) ** 2;
  return binWeights(spectrum, (f2) => scale / (f2 * (f2 + 10 * spreadHz2)));
}

function binWeights(spectrum: Spectrum, weightOf: (f2: number) => number): Float64Array {
  const weights = new Float64Array(spectrum.meanSquare.length);
  for (let k = 1; k < weights.length; k++) weights[k] = weightOf((k * spectrum.binHz) ** 2);
  return weights;
}

export interface DisplacementOptions {
  readonly rateHz: number;
  /** Edges, Hz: gain 1 between them, falling to 0 at half the lower and at 1.25 times the upper one. */
  readonly bandHz: readonly [number, number];
  readonly unit: AccelerationUnit;
}

/** Periods of the lower edge over which a stretch is faded in, and out. */
const FADE_PERIODS = 1.9;
/** Fades' worth left out of the result at each end, where the fade still rings. */
const CUT_FADES = 3;
/** Fades' worth that a stretch needs: both cuts, and something between. */
const NEEDED_FADES = 8;
/** What a stretch needs in periods of the lower edge. */
export const DISPLACEMENT_PERIODS = NEEDED_FADES * FADE_PERIODS;

/**
 * Displacement over time: acceleration of one stretch, integrated twice in the frequency domain within a band. The
 * stretch is faded in and out over 1.9 periods of the lower edge; three times that at each end is left out of the result.
 *
 * @param x Acceleration, at least 15.2 periods of the lower edge.
 * @param options Rate, band, unit.
 * @returns µm, shorter than x by 5.7·rate/lower edge at each end.
 * @throws SignalRangeError if the band is not in order, lies above half the rate, or the stretch is too short.
 * @see Kinematics; 1 g = 9.80665 m/s².
 * @example 10 Hz at 1 g peak swings 4968.1 µm peak to peak.
 */
export function displacementWaveform(x: Float64Array, options: DisplacementOptions): Float64Array {
  const { rateHz, bandHz, unit } = options;
  const [lowHz, highHz] = bandHz;
  requirePositive('rateHz', rateHz);
  requirePositive('bandHz[0]', lowHz);
  if (!(highHz > lowHz && highHz <= rateHz / 2)) {
    throw new SignalRangeError('bandHz', bandHz, `needs edges in order, the upper at most ${rateHz / 2} Hz`);
  }
  const fade = Math.ceil((FADE_PERIODS * rateHz) / lowHz);
  const cut = CUT_FADES * fade;
  const needed = NEEDED_FADES * fade;
  if (x.length < needed) {
    throw new SignalRangeError(
      'x.length',
      x.length,
      `displacement from ${lowHz} Hz needs ${needed} samples or more`,
    );
  }
  const size = nextPowerOfTwo(x.length);
  const padded = new Float64Array(size);
  let mean = 0;
  for (let i = 0; i < x.length; i++) mean += x[i]! / x.length;
  for (let i = 0; i < x.length; i++) {
    const end = Math.min(i + 0.5, x.length - i - 0.5);
    const gain = end < fade ? 0.5 - 0.5 * Math.cos((Math.PI * end) / fade) : 1;
    padded[i] = (x[i]! - mean) * gain;
  }
  const spectrum = new Float64Array(2 * size);
  const bins = realFft(padded, new Float64Array(2 * size));
  const binHz = rateHz / size;
  const scale = -2e6 * metresPerSecond2(unit);
  const first = Math.max(1, Math.ceil(lowHz / 2 / binHz));
  const last = Math.min(size / 2 - 1, Math.floor((1.25 * highHz) / binHz));
  for (let k = first; k <= last; k++) {
    const f = k * binHz;
    const gain = (bandGain(f, lowHz, highHz) * scale) / (2 * Math.PI * f) ** 2;
    spectrum[2 * k] = bins[2 * k]! * gain;
    spectrum[2 * k + 1] = bins[2 * k + 1]! * gain;
  }
  // Only positive frequencies, doubled: the real part of the inverse is the signal.
  const complex = inverseFft(spectrum);
  const out = new Float64Array(x.length - 2 * cut);
  for (let i = 0; i < out.length; i++) out[i] = complex[2 * (i + cut)]!;
  return out;
}

/** Raised-cosine flanks outside the band keep the filter's ringing shorter than the ends that are left out. */
function bandGain(f: number, lowHz: number, highHz: number): number {
  if (f < lowHz) return 0.5 - 0.5 * Math.cos((Math.PI * (f - lowHz / 2)) / (lowHz / 2));
  if (f > highHz) return 0.5 + 0.5 * Math.cos((Math.PI * (f - highHz)) / (0.25 * highHz));
  return 1;
}
