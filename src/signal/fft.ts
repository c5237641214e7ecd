import FFT from 'fft.js';
import { SignalRangeError } from './range-error.ts';

/** Largest transform: its tables and buffers take about 200 MB. */
const MAX_SIZE = 2 ** 22;

const plans = new Map<number, FFT>();

function planOf(quantity: string, size: number): FFT {
  let plan = plans.get(size);
  if (plan === undefined) {
    if (!(size >= 2 && size <= MAX_SIZE && Number.isInteger(Math.log2(size)))) {
      throw new SignalRangeError(quantity, size, `needs a power of two from 2 to ${MAX_SIZE}`);
    }
    plan = new FFT(size);
    plans.set(size, plan);
  }
  return plan;
}

/**
 * Smallest power of two that is at least `n`.
 *
 * @param n 1 to 2^22.
 * @throws SignalRangeError outside of that.
 * @example nextPowerOfTwo(5120) is 8192.
 */
export function nextPowerOfTwo(n: number): number {
  if (!(n >= 1 && n <= MAX_SIZE)) throw new SignalRangeError('n', n, `needs 1 to ${MAX_SIZE}`);
  return 2 ** Math.ceil(Math.log2(n));
}

/**
 * Discrete Fourier transform of real samples: X_k = Σ x_n·exp(−2πi·kn/N), unscaled.
 *
 * @param x N real samples, N a power of two from 2 to 2^22.
 * @param out Scratch of 2N numbers to avoid allocation; its upper half is left undefined.
 * @returns View of N + 2 numbers on `out`: real and imaginary part of bins 0..N/2, interleaved.
 * @throws SignalRangeError if N is no power of two or `out` is too short.
 * @example realFft(Float64Array.of(1, 0, -1, 0)) has bin 1 = 2 + 0i and bins 0 and 2 zero.
 */
export function realFft(x: Float64Array, out = new Float64Array(2 * x.length)): Float64Array {
  const n = x.length;
  const plan = planOf('x.length', n);
  requireScratch(out, 2 * n);
  plan.realTransform(out, x);
  return out.subarray(0, n + 2);
}

/**
 * Inverse transform of a complex spectrum: x_n = 1/N·Σ X_k·exp(2πi·kn/N).
 *
 * @param spectrum 2N numbers, real and imaginary parts interleaved, N a power of two.
 * @param out Another array of 2N numbers to avoid allocation.
 * @returns `out`: N complex samples, interleaved.
 * @throws SignalRangeError if N is no power of two or `out` is too short.
 * @example inverseFft(Float64Array.of(0, 0, 2, 0)) is 1 + 0i, −1 + 0i.
 */
export function inverseFft(spectrum: Float64Array, out = new Float64Array(spectrum.length)): Float64Array {
  const plan = planOf('spectrum.length / 2', spectrum.length / 2);
  requireScratch(out, spectrum.length);
  plan.inverseTransform(out, spectrum);
  return out;
}

function requireScratch(out: Float64Array, length: number): void {
  if (out.length !== length) throw new SignalRangeError('out.length', out.length, `needs to be ${length}`);
}
