import { requireCount } from './range-error.ts';

export type WindowName = 'rectangular' | 'hann' | 'flat-top';

/**
 * w = Σ (−1)^k·a_k·cos(2πk·n/N), k from 0. Flat top: ISO 18431-2:2004, whose mean is 1 and whose peak is 4.6392
 * (other sets go by the same name, with peak 1).
 */
const cosineTerms: Record<WindowName, readonly number[]> = {
  rectangular: [1],
  hann: [0.5, 0.5],
  'flat-top': [1, 1.933, 1.286, 0.388, 0.0322],
};

/**
 * Samples of a periodic window (the value at n = N would repeat that at 0), as averaged spectra want it.
 *
 * @param name Which window.
 * @param n Samples, 1 or more.
 * @returns `n` weights.
 * @throws SignalRangeError if `n` is not a whole number above 0.
 * @see ISO 18431-2:2004 for the flat top; Harris 1978, Proc. IEEE 66(1), for the rest.
 * @example makeWindow('hann', 4) is 0, 0.5, 1, 0.5.
 */
export function makeWindow(name: WindowName, n: number): Float64Array {
  requireCount('n', n, 1);
  const terms = cosineTerms[name];
  const window = new Float64Array(n);
  for (let i = 0; i < n; i++) {
    let value = 0;
    for (let k = 0; k < terms.length; k++) {
      // i·k reduced modulo n first: the cosine of a small angle is exact to the last bit.
      const term = terms[k]! * Math.cos((2 * Math.PI * ((i * k) % n)) / n);
      value += k % 2 === 0 ? term : -term;
    }
    window[i] = value;
  }
  return window;
}

/**
 * Mean of the window: by how much it lowers the height of a line.
 *
 * @param window Weights, at least one.
 * @returns Σw/N.
 * @see Harris 1978, Proc. IEEE 66(1), Table I.
 * @example coherentGain(makeWindow('hann', 4096)) is 0.5.
 */
export function coherentGain(window: Float64Array): number {
  requireCount('window.length', window.length, 1);
  let sum = 0;
  for (let i = 0; i < window.length; i++) sum += window[i]!;
  return sum / window.length;
}

/**
 * Equivalent noise bandwidth in units of 1/T, T the length of the window.
 *
 * @param window Weights, at least one, not all zero.
 * @returns N·Σw²/(Σw)².
 * @see Harris 1978, Proc. IEEE 66(1), Table I.
 * @example enbwBins(makeWindow('hann', 4096)) is 1.5; of the flat top 3.7709.
 */
export function enbwBins(window: Float64Array): number {
  const gain = coherentGain(window);
  let square = 0;
  for (let i = 0; i < window.length; i++) square += window[i]! * window[i]!;
  return square / window.length / (gain * gain);
}

/**
 * From the top of the window's main lobe to its first zero, in units of 1/T.
 *
 * @example mainLobeHalfWidthBins('hann') is 2, of the flat top 5.
 */
export function mainLobeHalfWidthBins(name: WindowName): number {
  return cosineTerms[name].length;
}

/**
 * Second moment of the window's power transform: how far a line spreads, squared, in units of 1/T². A figure that
 * falls steeply with frequency (velocity from acceleration) is read too high by that spread unless allowed for.
 *
 * @returns Σk²a_k²/2 over a_0² + Σa_k²/2; 0 for the rectangular window, where the moment has no limit and no
 *   allowance is possible.
 * @example lineSpreadBins2('hann') is 1/3.
 */
export function lineSpreadBins2(name: WindowName): number {
  const terms = cosineTerms[name];
  let moment = 0;
  let power = terms[0]! ** 2;
  for (let k = 1; k < terms.length; k++) {
    moment += (k * k * terms[k]! ** 2) / 2;
    power += terms[k]! ** 2 / 2;
  }
  return moment / power;
}

/**
 * Height of the window's transform at a distance from a line, its top being 1.
 *
 * @param name Which window.
 * @param offsetBins Distance in units of 1/T; the sign does not matter. The limit of long windows: within 1e-6 from
 *   a thousand samples up.
 * @returns |W(d)|/|W(0)|.
 * @see Harris 1978, Proc. IEEE 66(1): scalloping loss is this at 0.5.
 * @example −20·log10 of windowResponse('hann', 0.5) is 1.4236 dB.
 */
export function windowResponse(name: WindowName, offsetBins: number): number {
  const terms = cosineTerms[name];
  let sum = terms[0]! * sinc(offsetBins);
  for (let k = 1; k < terms.length; k++) {
    // About the window's middle all terms are positive.
    sum += (terms[k]! / 2) * (sinc(offsetBins - k) + sinc(offsetBins + k));
  }
  return Math.abs(sum) / terms[0]!;
}

function sinc(x: number): number {
  return x === 0 ? 1 : Math.sin(Math.PI * x) / (Math.PI * x);
}
