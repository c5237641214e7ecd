/** Signals for the tests of the signal room; all seeded or closed-form. */
import { gaussian } from '../support/seeded.ts';

export function sine(
  n: number,
  options: {
    readonly rateHz: number;
    readonly hz: number;
    readonly amplitude?: number;
    readonly phase?: number;
  },
): Float64Array {
  const { rateHz, hz, amplitude = 1, phase = 0 } = options;
  return Float64Array.from(
    { length: n },
    (_, i) => amplitude * Math.sin((2 * Math.PI * hz * i) / rateHz + phase),
  );
}

export function sum(...signals: Float64Array[]): Float64Array {
  return signals[0]!.map((_, i) => signals.reduce((total, signal) => total + signal[i]!, 0));
}

/** Gaussian noise of deviation 1. */
export function noise(n: number, seed: number): Float64Array {
  const next = gaussian(seed);
  return Float64Array.from({ length: n }, next);
}

/** Amplitude of one frequency in a stretch, by correlation over whole periods or a long Hann window. */
export function toneAmplitude(x: Float64Array, rateHz: number, hz: number): number {
  let re = 0;
  let im = 0;
  let weight = 0;
  for (let i = 0; i < x.length; i++) {
    const w = 1 - Math.cos((2 * Math.PI * i) / x.length);
    const angle = (2 * Math.PI * hz * i) / rateHz;
    re += w * x[i]! * Math.cos(angle);
    im += w * x[i]! * Math.sin(angle);
    weight += w;
  }
  return (2 * Math.hypot(re, im)) / weight;
}

/** Straight from the definition, O(n²). */
export function naiveDft(x: Float64Array): { re: number; im: number }[] {
  const n = x.length;
  return Array.from({ length: n }, (_, k) => {
    let re = 0;
    let im = 0;
    for (let i = 0; i < n; i++) {
      const angle = (-2 * Math.PI * ((i * k) % n)) / n;
      re += x[i]! * Math.cos(angle);
      im += x[i]! * Math.sin(angle);
    }
    return { re, im };
  });
}

export function decibels(ratio: number): number {
  return 20 * Math.log10(ratio);
}
