import { inverseFft, nextPowerOfTwo, realFft } from './fft.ts';
import { requireCount, requirePositive, SignalRangeError } from './range-error.ts';

/**
 * Samples a transform takes at most: long records are cut into pieces that overlap by what is dropped at their ends, so
 * memory stays bounded and the work stays in the cache.
 */
const PIECE_SAMPLES = 2 ** 15;

/** A record in the frequency domain, piece by piece: made once, used for any number of bands. */
export interface RecordTransform {
  readonly rateHz: number;
  readonly samples: number;
  /** Length of each transform, a power of two. */
  readonly size: number;
  /** Samples at both ends of a piece that are dropped: the first half of them is faded, the rest is for the band's ringing. */
  readonly cutSamples: number;
  readonly pieces: readonly Piece[];
}

interface Piece {
  /** Raw index of the piece's first sample. */
  readonly from: number;
  /** Samples of the record in it. */
  readonly length: number;
  /** Bins 0..size/2, interleaved. */
  readonly bins: Float64Array;
}

export interface TransformOptions {
  readonly rateHz: number;
  /** Left out at both ends, seconds: 0.05 if not given. */
  readonly cutS?: number;
}

export interface BandOptions {
  /** Edges, Hz. */
  readonly bandHz: readonly [number, number];
  /** Highest envelope frequency that must come out unaliased, Hz; the whole bandwidth if left out. */
  readonly fmaxHz?: number;
}

export interface SquaredEnvelope {
  /** Squared amplitude of the band's analytic signal, in the signal's unit squared: A² for a sine of amplitude A. */
  readonly values: Float64Array;
  /** Of the values, Hz: the raw rate over a power of two. */
  readonly rateHz: number;
  /** Edges as used: whole bins, Hz. */
  readonly bandHz: [number, number];
  /** Raw index of values[0]. */
  readonly firstAt: number;
}

/** Complex envelope of a band about its lower edge. */
export interface ComplexBand {
  /** Interleaved. */
  readonly values: Float64Array;
  readonly rateHz: number;
  readonly bandHz: [number, number];
  readonly firstAt: number;
}

/**
 * Transforms a record for `bandEnvelope`; its mean is removed first.
 *
 * @param x Samples; more than twice the cut.
 * @param options Rate, and what is cut at both ends.
 * @returns See `RecordTransform`.
 * @throws SignalRangeError if the record is not longer than what is cut.
 * @example 10 s at 40 960 Hz: 15 pieces of 32 768 samples.
 */
export function recordTransform(x: Float64Array, options: TransformOptions): RecordTransform {
  const { rateHz, cutS = 0.05 } = options;
  requirePositive('rateHz', rateHz);
  const cutSamples = Math.ceil(cutS * rateHz);
  requireCount('cutS · rateHz', cutSamples, 0);
  if (x.length < 2 * cutSamples + 16) {
    throw new SignalRangeError('x.length', x.length, `needs ${2 * cutSamples + 16} samples or more`);
  }
  let mean = 0;
  for (let i = 0; i < x.length; i++) mean += x[i]!;
  mean /= x.length;
  // A piece is at least eight cuts long, so that at most a third of the work is thrown away.
  const most = Math.max(PIECE_SAMPLES, nextPowerOfTwo(8 * cutSamples + 1));
  const size = Math.min(most, nextPowerOfTwo(x.length));
  const grid = size / 16;
  const step = Math.floor((size - 2 * cutSamples) / grid) * grid;
  const block = new Float64Array(size);
  const pieces: Piece[] = [];
  const fade = Math.floor(cutSamples / 2);
  for (let from = 0; ; from += step) {
    const length = Math.min(size, x.length - from);
    for (let i = 0; i < length; i++) block[i] = x[from + i]! - mean;
    block.fill(0, length);
    // Ends that are dropped anyway are faded, so that a sharp band edge has no step to ring on.
    for (let i = 0; i < fade; i++) {
      const gain = 0.5 - 0.5 * Math.cos((Math.PI * (i + 0.5)) / fade);
      block[i] = block[i]! * gain;
      block[length - 1 - i] = block[length - 1 - i]! * gain;
    }
    pieces.push({ from, length, bins: realFft(block).slice() });
    if (from + length >= x.length) break;
  }
  return { rateHz, samples: x.length, size, cutSamples, pieces };
}

/**
 * Complex envelope of a band: the band's bins alone, moved to 0 Hz, transformed back at the shortest power of two that
 * serves. Its modulus is that of the analytic signal.
 *
 * @param transform From `recordTransform`.
 * @param options Band and wanted envelope frequency.
 * @returns See `ComplexBand`.
 * @throws SignalRangeError if the band is not in order, above half the rate, or narrower than two bins.
 * @see Randall and Antoni 2011, MSSP 25, 485–520: band-pass by one-sided inverse transform.
 * @example A sine of amplitude 3 inside the band has modulus 3 throughout.
 */
export function complexBand(transform: RecordTransform, options: BandOptions): ComplexBand {
  const { rateHz, size, cutSamples, pieces, samples } = transform;
  const [lowHz, highHz] = options.bandHz;
  if (!(lowHz >= 0 && highHz > lowHz && highHz <= rateHz / 2)) {
    throw new SignalRangeError('bandHz', options.bandHz, `needs edges in order within 0 to ${rateHz / 2} Hz`);
  }
  const binHz = rateHz / size;
  const first = Math.max(1, Math.ceil(lowHz / binHz));
  const last = Math.min(size / 2 - 1, Math.floor(highHz / binHz));
  const width = last - first + 1;
  if (width < 2) throw new SignalRangeError('bandHz', options.bandHz, `needs at least ${2 * binHz} Hz`);
  // The square of a band of width B reaches to B: sampled at B + fmax, what folds stays above fmax.
  const wanted = Math.min(width, Math.ceil((options.fmaxHz ?? width * binHz) / binHz));
  const short = Math.min(size, Math.max(16, nextPowerOfTwo(width + wanted)));
  const ratio = size / short;
  const spectrum = new Float64Array(2 * short);
  const scratch = new Float64Array(2 * short);
  const scale = (2 * short) / size;
  const start = Math.ceil(cutSamples / ratio);
  const end = Math.floor((samples - 1 - cutSamples) / ratio);
  const values = new Float64Array(2 * Math.max(0, end - start + 1));
  let next = start;
  for (const { from, length, bins } of pieces) {
    for (let k = 0; k < 2 * width; k++) spectrum[k] = bins[2 * first + k]! * scale;
    inverseFft(spectrum, scratch);
    // Outputs are numbered over the whole record: from is a multiple of ratio, by the choice of step.
    const offset = from / ratio;
    const stop = Math.min(end, Math.floor((from + length - 1 - cutSamples) / ratio));
    if (stop < next) continue;
    values.set(scratch.subarray(2 * (next - offset), 2 * (stop - offset + 1)), 2 * (next - start));
    next = stop + 1;
  }
  return { values, rateHz: rateHz / ratio, bandHz: [first * binHz, last * binHz], firstAt: start * ratio };
}

/**
 * Squared envelope of one band of a record: |analytic signal|².
 *
 * @param transform From `recordTransform`.
 * @param options Band and wanted envelope frequency.
 * @returns See `SquaredEnvelope`.
 * @throws SignalRangeError as `complexBand`.
 * @see Randall and Antoni 2011, MSSP 25, 485–520.
 * @example (1 + 0.5·cos 2πf_m t)·unit carrier: mean 1.125, line 1.0 at f_m, 0.125 at 2·f_m.
 */
export function bandEnvelope(transform: RecordTransform, options: BandOptions): SquaredEnvelope {
  const { values: c, ...rest } = complexBand(transform, options);
  const values = new Float64Array(c.length / 2);
  for (let i = 0; i < values.length; i++) values[i] = c[2 * i]! * c[2 * i]! + c[2 * i + 1]! * c[2 * i + 1]!;
  return { values, ...rest };
}

/**
 * Squared envelope of one band of samples; for several bands of one record use `recordTransform` and `bandEnvelope`.
 *
 * @param x Samples, more than twice what is cut.
 * @param options Rate, band, wanted envelope frequency, cut.
 * @returns See `SquaredEnvelope`.
 * @throws SignalRangeError as `recordTransform` and `complexBand`.
 * @see Randall and Antoni 2011, MSSP 25, 485–520.
 * @example A sine of amplitude 3 in the band gives 9 throughout.
 */
export function squaredEnvelope(x: Float64Array, options: TransformOptions & BandOptions): SquaredEnvelope {
  return bandEnvelope(recordTransform(x, options), options);
}
