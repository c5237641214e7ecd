import { nextPowerOfTwo, realFft } from './fft.ts';
import { requireCount, requirePositive, SignalRangeError } from './range-error.ts';

/** Longest filter that is designed: beyond that the ask is a mistake, or wants several stages. */
const MAX_TAPS = 16_383;
/** By how much more than asked a filter is designed: Kaiser's length lands about 1 dB short. */
const DESIGN_RESERVE_DB = 2;

export interface LowpassOptions {
  /** Sample rate, Hz. */
  readonly rateHz: number;
  /** Upper end of the pass band, Hz. */
  readonly passHz: number;
  /** Begin of the stop band, Hz, above `passHz` and at most half the rate. */
  readonly stopHz: number;
  /** Least attenuation in the stop band, dB, 21 to 140; the pass band ripples by about as little. */
  readonly attenuationDb: number;
}

/**
 * Shape parameter of the Kaiser window for a wanted attenuation.
 *
 * @param attenuationDb Ripple of pass and stop band below 1, dB; below 21 the rectangular window (0) serves.
 * @returns β, without unit.
 * @throws SignalRangeError if it is not a finite number above 0.
 * @see Oppenheim and Schafer, Discrete-Time Signal Processing, Kaiser window design.
 * @example kaiserBeta(80) is 7.85726.
 */
export function kaiserBeta(attenuationDb: number): number {
  requirePositive('attenuationDb', attenuationDb);
  if (attenuationDb > 50) return 0.1102 * (attenuationDb - 8.7);
  if (attenuationDb > 21) return 0.5842 * (attenuationDb - 21) ** 0.4 + 0.07886 * (attenuationDb - 21);
  return 0;
}

/**
 * Kaiser's estimate of a filter's length, made odd.
 *
 * @param options Rate, both band edges, attenuation above 8 dB.
 * @returns Taps. The attenuation reached falls about 1 dB short.
 * @throws SignalRangeError where the band edges contradict each other.
 * @see Oppenheim and Schafer, Discrete-Time Signal Processing: M = (A − 7.95)/(2.285·Δω).
 * @example Rate 25 600, pass 2500, stop 3900 Hz, 80 dB: 93.
 */
export function kaiserTaps(options: LowpassOptions): number {
  checkEdges(options);
  const { rateHz, passHz, stopHz, attenuationDb } = options;
  if (!(attenuationDb > 8)) throw new SignalRangeError('attenuationDb', attenuationDb, 'needs more than 8');
  const transition = (2 * Math.PI * (stopHz - passHz)) / rateHz;
  const order = Math.ceil((attenuationDb - 7.95) / (2.285 * transition));
  return order % 2 === 0 ? order + 1 : order + 2;
}

/**
 * Kaiser window, symmetric.
 *
 * @param n Samples, 1 or more.
 * @param beta Shape parameter, 0 or more.
 * @returns I0(β·√(1 − (2i/(n−1) − 1)²))/I0(β).
 * @example Sample 0 of kaiserWindow(11, 0) is 1.
 */
export function kaiserWindow(n: number, beta: number): Float64Array {
  requireCount('n', n, 1);
  const window = new Float64Array(n);
  const centre = (n - 1) / 2;
  const top = besselI0(beta);
  for (let i = 0; i < n; i++) {
    const x = centre === 0 ? 0 : (i - centre) / centre;
    window[i] = besselI0(beta * Math.sqrt(Math.max(0, 1 - x * x))) / top;
  }
  return window;
}

/**
 * Linear-phase low-pass by the window method, unit gain at 0 Hz.
 *
 * @param n Taps, odd.
 * @param cutoffHz Middle of the transition, Hz (gain about one half).
 * @param rateHz Sample rate, Hz.
 * @param beta Shape parameter of the Kaiser window.
 * @returns Taps, symmetric.
 * @see Oppenheim and Schafer, Discrete-Time Signal Processing, window method.
 * @example Of windowedLowpass(11, 0.25, 1, 4.533514120981) the middle tap is 0.501200163307.
 */
export function windowedLowpass(n: number, cutoffHz: number, rateHz: number, beta: number): Float64Array {
  requireCount('n', n, 1);
  if (n % 2 === 0) throw new SignalRangeError('n', n, 'needs to be odd');
  const taps = kaiserWindow(n, beta);
  const centre = (n - 1) / 2;
  const relative = (2 * cutoffHz) / rateHz;
  let sum = 0;
  for (let i = 0; i < n; i++) {
    const x = (i - centre) * relative;
    // Zero crossings of the sinc are exact zeros: a half-band filter then skips them.
    const sinc = x === 0 ? 1 : Number.isInteger(x) ? 0 : Math.sin(Math.PI * x) / (Math.PI * x);
    taps[i] = taps[i]! * sinc;
    sum += taps[i]!;
  }
  for (let i = 0; i < n; i++) taps[i] = taps[i]! / sum;
  return taps;
}

/**
 * Shortest Kaiser low-pass, from the estimate upwards, that is seen to hold the asked attenuation.
 *
 * @param options Rate, band edges, attenuation.
 * @returns Taps, odd in number, symmetric, sum 1.
 * @throws SignalRangeError where the band edges contradict each other, the attenuation lies outside 21 to 140 dB, or
 *   more than 16 383 taps would be needed.
 * @see Oppenheim and Schafer, Discrete-Time Signal Processing, Kaiser window design.
 * @example Rate 25 600, pass 2500, stop 3900 Hz, 80 dB: 97 taps, where the plain estimate gives 93 and 78.8 dB.
 */
export function designLowpass(options: LowpassOptions): Float64Array {
  checkEdges(options);
  const { rateHz, passHz, stopHz, attenuationDb } = options;
  if (!(attenuationDb >= 21 && attenuationDb <= 140)) {
    throw new SignalRangeError('attenuationDb', attenuationDb, 'needs 21 to 140');
  }
  const reserved = { ...options, attenuationDb: attenuationDb + DESIGN_RESERVE_DB };
  const beta = kaiserBeta(reserved.attenuationDb);
  const cutoffHz = (passHz + stopHz) / 2;
  for (let n = kaiserTaps(reserved); n <= MAX_TAPS; n += 2) {
    const taps = windowedLowpass(n, cutoffHz, rateHz, beta);
    if (worstGain(taps, rateHz, stopHz) <= 10 ** (-attenuationDb / 20)) return taps;
  }
  throw new SignalRangeError(
    'stopHz',
    stopHz,
    `the step from ${passHz} Hz at ${rateHz} Hz needs more than ${MAX_TAPS} taps; widen it or decimate in stages`,
  );
}

/**
 * Gain of a symmetric filter.
 *
 * @param taps Odd in number, symmetric.
 * @param rateHz Sample rate, Hz.
 * @param fHz Frequency, Hz.
 * @returns Amplitude with sign, the delay left out.
 * @example filterGain(Float64Array.of(0.25, 0.5, 0.25), 4, 1) is 0.5.
 */
export function filterGain(taps: Float64Array, rateHz: number, fHz: number): number {
  const centre = (taps.length - 1) / 2;
  const angle = (2 * Math.PI * fHz) / rateHz;
  let gain = taps[centre]!;
  for (let k = 1; k <= centre; k++) gain += 2 * taps[centre + k]! * Math.cos(angle * k);
  return gain;
}

/** Largest gain from stopHz up, on a grid of 16 points a side lobe and at the edge itself. */
function worstGain(taps: Float64Array, rateHz: number, stopHz: number): number {
  const padded = new Float64Array(16 * nextPowerOfTwo(taps.length));
  padded.set(taps);
  const bins = realFft(padded);
  let worst = Math.abs(filterGain(taps, rateHz, stopHz));
  for (let k = Math.ceil((stopHz / rateHz) * padded.length); 2 * k <= padded.length; k++) {
    worst = Math.max(worst, Math.hypot(bins[2 * k]!, bins[2 * k + 1]!));
  }
  return worst;
}

function checkEdges({ rateHz, passHz, stopHz }: LowpassOptions): void {
  requirePositive('rateHz', rateHz);
  requirePositive('passHz', passHz);
  if (!(stopHz > passHz)) throw new SignalRangeError('stopHz', stopHz, `needs to be above passHz, ${passHz}`);
  if (!(stopHz <= rateHz / 2)) {
    throw new SignalRangeError('stopHz', stopHz, `needs to be at most half the rate, ${rateHz / 2}`);
  }
}

/** Modified Bessel function of the first kind, order 0, by its power series: all terms positive, no cancellation. */
function besselI0(x: number): number {
  const quarter = (x * x) / 4;
  let term = 1;
  let sum = 1;
  for (let k = 1; term > sum * 1e-17; k++) {
    term *= quarter / (k * k);
    sum += term;
  }
  return sum;
}
