/** Figures for people. */

/**
 * Four significant digits.
 * @param {number} value
 * @returns {string}
 */
export function significant(value) {
  if (value === 0) return '0';
  const size = Math.abs(value);
  if (size < 1e-4 || size >= 1e6) return value.toExponential(3);
  return String(Number(value.toPrecision(4)));
}

/**
 * A frequency or time with as many decimals as the distance of two places asks for.
 * @param {number} value
 * @param {number} step
 * @returns {string}
 */
export function placed(value, step) {
  return value.toFixed(Math.min(6, Math.max(0, Math.ceil(-Math.log10(step)) + 1)));
}

/**
 * @param {number} value
 * @param {10 | 20} factor 20 for amplitudes, 10 for what is a power already
 * @returns {number} decibels against 1, −300 for nothing
 */
export function decibel(value, factor) {
  return value > 0 ? factor * Math.log10(value) : -300;
}

/**
 * A mark of an axis, with the decimals that its step has.
 * @param {number} value
 * @param {number} step
 * @returns {string}
 */
export function stepped(value, step) {
  const decimals = /\.(\d+)$/.exec(step.toFixed(9).replace(/0+$/, ''))?.[1]?.length ?? 0;
  return value.toFixed(decimals);
}

/** Height of a Hann line at a distance from its top, in units of 1/T (Harris 1978). @param {number} away */
function hann(away) {
  if (away === 0) return 1;
  if (Math.abs(away) === 1) return 0.5;
  return Math.sin(Math.PI * away) / (Math.PI * away * (1 - away * away));
}

/**
 * Where a line stands between the bins, and how high, from its highest bin and that one's neighbours: exact for a lone
 * sine under a Hann window.
 * @param {number} left height of the bin below
 * @param {number} centre
 * @param {number} right
 * @param {number} step distance of bins in units of 1/T, up to 1
 * @returns {{ offset: number, height: number }} offset in bins; the bin itself where it is no maximum
 */
export function betweenBins(left, centre, right, step) {
  if (!(centre > 0 && centre >= left && centre >= right)) return { offset: 0, height: centre };
  const ratio = Math.max(left, right) / centre;
  let [low, high] = [0, step / 2];
  for (let k = 0; k < 30; k++) {
    const middle = (low + high) / 2;
    if (hann(step - middle) < ratio * hann(middle)) low = middle;
    else high = middle;
  }
  const away = (low + high) / 2;
  return { offset: (right >= left ? away : -away) / step, height: centre / hann(away) };
}
