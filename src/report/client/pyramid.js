/** The extremes of any stretch of a long waveform, found without looking at every sample. */

const FACTOR = 8;

/** @typedef {import('./types.d.ts').Level} Level */
/** @typedef {import('./types.d.ts').Extremes} Extremes */

export class Pyramid {
  /** @type {Level[]} */
  #levels;
  /** Samples that the finest entries stand for; 1: every sample is there. */
  finest;
  /** In all. */
  length;

  /**
   * @param {Int32Array} values samples, or with `block` above 1 pairs of lowest and highest
   * @param {number} block
   * @param {number} length samples in all
   */
  constructor(values, block, length) {
    this.finest = block;
    this.length = length;
    let level = { size: block, low: values, high: values };
    if (block > 1) {
      const entries = values.length / 2;
      level = { size: block, low: new Int32Array(entries), high: new Int32Array(entries) };
      for (let k = 0; k < entries; k++) {
        level.low[k] = /** @type {number} */ (values[2 * k]);
        level.high[k] = /** @type {number} */ (values[2 * k + 1]);
      }
    }
    this.#levels = [level];
    while (level.low.length > 2 * FACTOR) {
      level = coarser(level);
      this.#levels.push(level);
    }
  }

  /**
   * A sample, or of a block the middle of its extremes.
   * @param {number} index
   * @returns {number}
   */
  at(index) {
    const { size, low, high } = /** @type {Level} */ (this.#levels[0]);
    const k = Math.floor(index / size);
    const lowest = /** @type {number} */ (low[k]);
    return (lowest + /** @type {number} */ (high[k])) / 2;
  }

  /**
   * Extremes of the samples `from` to below `to`; entries that only partly lie within count whole at the finest level.
   * @param {number} from
   * @param {number} to
   * @returns {Extremes}
   */
  extremes(from, to) {
    const found = { low: Number.POSITIVE_INFINITY, high: Number.NEGATIVE_INFINITY };
    const first = Math.max(0, Math.floor(from / this.finest));
    const entries = /** @type {Level} */ (this.#levels[0]).low.length;
    this.#walk(0, first, Math.min(entries, Math.max(first + 1, Math.ceil(to / this.finest))), found);
    return found;
  }

  /**
   * @param {number} depth
   * @param {number} from entry of that level
   * @param {number} to
   * @param {Extremes} found
   */
  #walk(depth, from, to, found) {
    const next = this.#levels[depth + 1];
    const head = Math.min(to, Math.ceil(from / FACTOR) * FACTOR);
    const tail = Math.max(head, Math.floor(to / FACTOR) * FACTOR);
    if (next === undefined || tail - head < 2 * FACTOR) {
      this.#scan(depth, from, to, found);
      return;
    }
    this.#scan(depth, from, head, found);
    this.#walk(depth + 1, head / FACTOR, tail / FACTOR, found);
    this.#scan(depth, tail, to, found);
  }

  /**
   * @param {number} depth
   * @param {number} from
   * @param {number} to
   * @param {Extremes} found
   */
  #scan(depth, from, to, found) {
    const { low, high } = /** @type {Level} */ (this.#levels[depth]);
    for (let k = from; k < to; k++) {
      found.low = Math.min(found.low, /** @type {number} */ (low[k]));
      found.high = Math.max(found.high, /** @type {number} */ (high[k]));
    }
  }
}

/** @param {Level} level @returns {Level} */
function coarser(level) {
  const entries = Math.ceil(level.low.length / FACTOR);
  const low = new Int32Array(entries);
  const high = new Int32Array(entries);
  for (let k = 0; k < entries; k++) {
    let least = /** @type {number} */ (level.low[k * FACTOR]);
    let most = /** @type {number} */ (level.high[k * FACTOR]);
    const to = Math.min(level.low.length, (k + 1) * FACTOR);
    for (let i = k * FACTOR + 1; i < to; i++) {
      least = Math.min(least, /** @type {number} */ (level.low[i]));
      most = Math.max(most, /** @type {number} */ (level.high[i]));
    }
    low[k] = least;
    high[k] = most;
  }
  return { size: level.size * FACTOR, low, high };
}
