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
