/** Amplitude and phase of one frequency by the definition of the discrete Fourier transform, Hann-windowed. */
export function lineAt(x: Float64Array, rateHz: number, hz: number): { amplitude: number; phaseRad: number } {
  let re = 0;
  let im = 0;
  for (let n = 0; n < x.length; n++) {
    const hann = 1 - Math.cos((2 * Math.PI * n) / x.length);
    const angle = (2 * Math.PI * hz * n) / rateHz;
    re += x[n]! * hann * Math.cos(angle);
    im -= x[n]! * hann * Math.sin(angle);
  }
  return { amplitude: (2 * Math.hypot(re, im)) / x.length, phaseRad: Math.atan2(im, re) };
}

/** Where between two frequencies the strongest line stands, to `stepHz`. */
export function strongestBetween(
  x: Float64Array,
  rateHz: number,
  fromHz: number,
  toHz: number,
  stepHz: number,
): number {
  let best = fromHz;
  let most = -1;
  for (let hz = fromHz; hz <= toHz; hz += stepHz) {
    const { amplitude } = lineAt(x, rateHz, hz);
    if (amplitude > most) {
      most = amplitude;
      best = hz;
    }
  }
  return best;
}

export function rms(x: Float64Array): number {
  return Math.sqrt(x.reduce((sum, v) => sum + v * v, 0) / x.length);
}

/** Acceleration peak in g of a sine of `mmS` velocity RMS: 2πf·√2·v, 1 g = 9.80665 m/s². */
export function peakGOf(mmS: number, hz: number): number {
  return (2 * Math.PI * hz * Math.SQRT2 * mmS * 1e-3) / 9.80665;
}
