import { nextPowerOfTwo, realFft } from './fft.ts';
import { requireCount, requirePositive, SignalRangeError } from './range-error.ts';
import { enbwBins, mainLobeHalfWidthBins, makeWindow, type WindowName, windowResponse } from './window.ts';

export interface SpectrumOptions {
  /** Sample rate, Hz. */
  readonly rateHz: number;
  /** Samples a block: T·rateHz, T = lines/Fmax. Zero-padded to a power of two where it is none. */
  readonly blockSamples: number;
  readonly window: WindowName;
  /** Share of a block that the next one repeats, 0 to below 1; 0.5 if left out. */
  readonly overlap?: number;
}

/** One-sided power spectrum, averaged over blocks. */
export interface Spectrum {
  /**
   * Mean square that each bin holds, in the signal's unit squared: the sum over bins is the mean square of the
   * (windowed) signal. The window's bandwidth and the zero-padding are already in it, so a band is a plain sum.
   */
  readonly meanSquare: Float64Array;
  /** Distance of bins, Hz: rate / fftSize. */
  readonly binHz: number;
  /** Line spacing 1/T, Hz: rate / blockSamples; equal to binHz where nothing was padded. */
  readonly lineHz: number;
  readonly window: WindowName;
  readonly enbwBins: number;
  /** Blocks averaged. */
  readonly averages: number;
  readonly blockSamples: number;
  readonly fftSize: number;
  readonly rateHz: number;
}

export interface Line {
  /** Where the line stands between the bins, Hz. */
  readonly hz: number;
  /** Its amplitude (peak, not RMS), in the signal's unit. */
  readonly amplitude: number;
}

/** Reach of a band beyond its edges, as a share of the half width of the window's main lobe. */
const EDGE_REACH = 0.75;

/**
 * Averaged power spectrum of a stretch: its mean removed (once, over the whole of it), blocks overlapped, windowed,
 * transformed, their powers averaged. All blocks that fit are used.
 *
 * @param x At least one block of samples.
 * @param options Rate, block, window, overlap.
 * @returns See `Spectrum`.
 * @throws SignalRangeError if x is shorter than a block or an option is out of range.
 * @see Welch 1967, IEEE Trans. Audio Electroacoust. AU-15(2).
 * @example A sine of amplitude 1 gives a spectrum whose sum is 0.5.
 */
export function averagedSpectrum(x: Float64Array, options: SpectrumOptions): Spectrum {
  const { rateHz, blockSamples, window: name, overlap = 0.5 } = options;
  requirePositive('rateHz', rateHz);
  requireCount('blockSamples', blockSamples, 4);
  const hop = hopSamples(blockSamples, overlap);
  if (x.length < blockSamples) {
    throw new SignalRangeError('x.length', x.length, `needs at least one block, ${blockSamples} samples`);
  }
  const fftSize = nextPowerOfTwo(blockSamples);
  const window = makeWindow(name, blockSamples);
  const block = new Float64Array(fftSize);
  const scratch = new Float64Array(2 * fftSize);
  const bins = fftSize / 2 + 1;
  const meanSquare = new Float64Array(bins);
  const averages = Math.floor((x.length - blockSamples) / hop) + 1;
  const mean = meanOf(x);
  for (let b = 0, from = 0; b < averages; b++, from += hop) {
    for (let i = 0; i < blockSamples; i++) block[i] = (x[from + i]! - mean) * window[i]!;
    const transform = realFft(block, scratch);
    for (let k = 0, at = 0; k < bins; k++, at += 2) {
      const re = transform[at]!;
      const im = transform[at + 1]!;
      meanSquare[k] = meanSquare[k]! + re * re + im * im;
    }
  }
  let square = 0;
  for (let i = 0; i < blockSamples; i++) square += window[i]! * window[i]!;
  const scale = 1 / (fftSize * square * averages);
  // Both halves of the spectrum in one, but 0 Hz and half the rate have no mirror image.
  for (let k = 0; k < bins; k++)
    meanSquare[k] = meanSquare[k]! * (k === 0 || k === bins - 1 ? scale : 2 * scale);
  return {
    meanSquare,
    binHz: rateHz / fftSize,
    lineHz: rateHz / blockSamples,
    window: name,
    enbwBins: enbwBins(window),
    averages,
    blockSamples,
    fftSize,
    rateHz,
  };
}

/**
 * The bins that belong to a band. A window spreads a line over its main lobe; so that a line exactly on an edge is
 * read whole, the band reaches outward by 0.75 of the lobe's half width (1.5/T for Hann, where less than 0.3 % of the
 * line's power lies beyond). A bin stands for half a bin to each side, and every bin that the reach touches counts, also
 * where padding put bins between the lines. Noise is read higher by the share that this adds: 3/T to 5/T of the
 * bandwidth for Hann, 0.05 to 0.08 % in RMS for 10–1000 Hz at 3200 lines.
 *
 * @param spectrum From `averagedSpectrum`.
 * @param bandHz Edges, Hz.
 * @returns First and last bin, clipped to the spectrum.
 * @throws SignalRangeError if the edges are not in order.
 * @example Hann, 1/T = 1 Hz, band 10–20 Hz: bins 9 to 21.
 */
export function bandBins(spectrum: Spectrum, bandHz: readonly [number, number]): [number, number] {
  const [lowHz, highHz] = bandHz;
  if (!(lowHz <= highHz)) throw new SignalRangeError('bandHz', bandHz, 'needs its lower edge first');
  const reachHz = EDGE_REACH * mainLobeHalfWidthBins(spectrum.window) * spectrum.lineHz;
  // A hair inward, so that a bin that only meets the reach does not depend on the last bit.
  const first = Math.floor((lowHz - reachHz) / spectrum.binHz + 0.5 + 1e-9);
  const last = Math.ceil((highHz + reachHz) / spectrum.binHz - 0.5 - 1e-9);
  return [Math.max(0, first), Math.min(spectrum.meanSquare.length - 1, last)];
}

/**
 * How the edges of a band are taken. `whole`: it reaches outward as in `bandBins`, so that a line on an edge is read
 * whole. `shared`: a bin counts by the share of it that lies within, so that noise is read as it is, bands side by side
 * add up to the whole, and a line on an edge is halved between its two neighbours.
 */
export type BandEdges = 'whole' | 'shared';

/**
 * Mean square of what lies in a band.
 *
 * @param spectrum From `averagedSpectrum`.
 * @param bandHz Edges, Hz.
 * @param options weight: a factor for each bin (from `velocityWeights`), 1 if left out. edges: `whole` if left out.
 * @returns Mean square in the signal's unit squared (or that of the weight); 0 where the band lies beyond the spectrum.
 * @throws SignalRangeError if the edges are not in order or the weights do not fit.
 * @example 10 Hz at 1 g peak, 10–1000 Hz, velocity weights: 110.36 mm/s after the root.
 */
export function bandMeanSquare(
  spectrum: Spectrum,
  bandHz: readonly [number, number],
  options: { readonly weight?: Float64Array; readonly edges?: BandEdges } = {},
): number {
  const { meanSquare } = spectrum;
  const { weight, edges = 'whole' } = options;
  if (weight !== undefined && weight.length !== meanSquare.length) {
    throw new SignalRangeError(
      'weight.length',
      weight.length,
      `needs one weight a bin, ${meanSquare.length}`,
    );
  }
  const [first, last] = bandBins(spectrum, bandHz);
  let sum = 0;
  for (let k = first; k <= last; k++) {
    const share = edges === 'whole' ? 1 : shareWithin(spectrum, k, bandHz);
    sum += share * meanSquare[k]! * (weight === undefined ? 1 : weight[k]!);
  }
  return sum;
}

/** Of a bin, which stands for half a bin to each side, within 0 Hz and half the rate. */
function shareWithin(
  { binHz, meanSquare }: Spectrum,
  bin: number,
  bandHz: readonly [number, number],
): number {
  const from = Math.max(0, bin - 0.5);
  const to = Math.min(meanSquare.length - 1, bin + 0.5);
  const inside = Math.min(to, bandHz[1] / binHz) - Math.max(from, bandHz[0] / binHz);
  return Math.max(0, inside) / (to - from);
}

/**
 * Amplitude that a sine standing exactly on each bin would have: the window's coherent gain is accounted for.
 *
 * @param spectrum From `averagedSpectrum`.
 * @returns One amplitude (peak) a bin, in the signal's unit. At 0 Hz and half the rate it means nothing.
 * @example A sine of amplitude 2 on bin 40 gives 2 there.
 */
export function lineAmplitudes(spectrum: Spectrum): Float64Array {
  const scale = amplitudeScale(spectrum);
  return spectrum.meanSquare.map((power) => Math.sqrt(power * scale));
}

/**
 * The line about a bin: place and amplitude between the bins, from the ratio of the larger neighbour to the bin and
 * the known shape of the window. Exact for a lone sine away from 0 Hz and half the rate; for anything wider than a line
 * the place stays within half a bin.
 *
 * @param spectrum From `averagedSpectrum`.
 * @param bin A local maximum, 1 to the last but one.
 * @returns Frequency in Hz and amplitude (peak).
 * @throws SignalRangeError if `bin` has no two neighbours.
 * @example A sine of amplitude 3 at 50.3 Hz, 1/T = 1 Hz, Hann: 50.300 Hz, 3.000.
 */
export function lineAmplitude(spectrum: Spectrum, bin: number): Line {
  const { meanSquare, binHz, lineHz, window } = spectrum;
  if (!(Number.isInteger(bin) && bin >= 1 && bin < meanSquare.length - 1)) {
    throw new SignalRangeError('bin', bin, `needs a neighbour at both sides: 1 to ${meanSquare.length - 2}`);
  }
  const centre = meanSquare[bin]!;
  if (centre === 0) return { hz: bin * binHz, amplitude: 0 };
  const left = meanSquare[bin - 1]!;
  const right = meanSquare[bin + 1]!;
  const step = binHz / lineHz;
  const ratio = Math.sqrt(Math.max(left, right) / centre);
  // In units of 1/T: at 0 the neighbour is lowest, at half a bin both are equal; in between it rises.
  let low = 0;
  let high = step / 2;
  for (let i = 0; i < 40; i++) {
    const middle = (low + high) / 2;
    if (windowResponse(window, step - middle) < ratio * windowResponse(window, middle)) low = middle;
    else high = middle;
  }
  const offset = (low + high) / 2;
  const amplitude = Math.sqrt(centre * amplitudeScale(spectrum)) / windowResponse(window, offset);
  return { hz: bin * binHz + (right >= left ? offset : -offset) * lineHz, amplitude };
}

/**
 * Bin of the largest mean square (times weight) with its frequency in a band, edges taken as they are.
 *
 * @param spectrum From `averagedSpectrum`.
 * @param bandHz Edges, Hz.
 * @returns The bin; null where no inner bin lies in the band or all are zero.
 * @example A lone sine on bin 40 is found as 40.
 */
export function strongestBin(spectrum: Spectrum, bandHz: readonly [number, number]): number | null {
  const { meanSquare, binHz } = spectrum;
  const first = Math.max(1, Math.ceil(bandHz[0] / binHz - 1e-9));
  const last = Math.min(meanSquare.length - 2, Math.floor(bandHz[1] / binHz + 1e-9));
  let best: number | null = null;
  let most = 0;
  for (let k = first; k <= last; k++) {
    if (meanSquare[k]! > most) {
      most = meanSquare[k]!;
      best = k;
    }
  }
  return best;
}

/**
 * How many independent blocks overlapped ones are worth: the relative random error of the averaged power is 1/√ of it.
 *
 * @param window Which window.
 * @param averages Blocks averaged, 1 or more.
 * @param overlap Share of a block that the next repeats, 0 to below 1.
 * @returns K/(1 + 2·Σ(1 − m/K)·c(m)²), c(m) the correlation of the window with itself m steps on.
 * @throws SignalRangeError if an argument is out of range.
 * @see Welch 1967, IEEE Trans. Audio Electroacoust. AU-15(2).
 * @example effectiveAverages('hann', 10) is 9.5238.
 */
export function effectiveAverages(window: WindowName, averages: number, overlap = 0.5): number {
  requireCount('averages', averages, 1);
  const length = 4096;
  const hop = hopSamples(length, overlap);
  const w = makeWindow(window, length);
  let power = 0;
  for (let i = 0; i < length; i++) power += w[i]! * w[i]!;
  let sum = 1;
  for (let m = 1; m < averages && m * hop < length; m++) {
    let product = 0;
    for (let i = m * hop; i < length; i++) product += w[i]! * w[i - m * hop]!;
    sum += 2 * (1 - m / averages) * (product / power) ** 2;
  }
  return averages / sum;
}

/** From 2·mean square of a bin to amplitude squared of a line on it. */
function amplitudeScale(spectrum: Spectrum): number {
  return (2 * spectrum.enbwBins * spectrum.fftSize) / spectrum.blockSamples;
}

function hopSamples(blockSamples: number, overlap: number): number {
  if (!(overlap >= 0 && overlap < 1)) throw new SignalRangeError('overlap', overlap, 'needs 0 to below 1');
  return Math.max(1, blockSamples - Math.floor(blockSamples * overlap));
}

function meanOf(x: Float64Array): number {
  let sum = 0;
  for (let i = 0; i < x.length; i++) sum += x[i]!;
  return sum / x.length;
}
