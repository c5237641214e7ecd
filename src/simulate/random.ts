/**
 * Seeded random numbers: xoshiro128** (Blackman and Vigna 2018) and, for Gaussian values, the polar method
 * (Marsaglia and Bray 1964). Same seed, same sequence, on every machine.
 */
export class Random {
  readonly #s: Uint32Array;
  #spare = Number.NaN;

  /** @param seed a number of 32 bits, or the four words of the state (not all zero). */
  constructor(seed: number | readonly [number, number, number, number]) {
    this.#s = new Uint32Array(4);
    if (typeof seed !== 'number') {
      if (seed.every((word) => word >>> 0 === 0)) {
        throw new RangeError('random: four zero words are no state; give at least one other');
      }
      this.#s.set(seed);
      return;
    }
    let x = seed >>> 0;
    for (let i = 0; i < 4; i++) {
      // Spread the seed's few bits over the state; a Weyl step and two multiply-xorshift rounds (as in MurmurHash3).
      x = (x + 0x9e3779b9) >>> 0;
      let z = x;
      z = Math.imul(z ^ (z >>> 16), 0x85ebca6b);
      z = Math.imul(z ^ (z >>> 13), 0xc2b2ae35);
      this.#s[i] = z ^ (z >>> 16);
    }
  }

  /** A stream of its own for one source, so that adding a source leaves the others as they were. */
  static stream(seed: number, label: string): Random {
    let hash = 0x811c9dc5 ^ (seed >>> 0);
    for (let i = 0; i < label.length; i++) hash = Math.imul(hash ^ label.charCodeAt(i), 0x01000193);
    return new Random(hash >>> 0);
  }

  /** 32 random bits. */
  uint32(): number {
    const s = this.#s;
    const s0 = s[0]!;
    const s1 = s[1]!;
    const x = Math.imul(s1, 5);
    const result = Math.imul((x << 7) | (x >>> 25), 9) >>> 0;
    const s2 = s[2]! ^ s0;
    const s3 = s[3]! ^ s1;
    s[1] = s1 ^ s2;
    s[0] = s0 ^ s3;
    s[2] = s2 ^ (s1 << 9);
    s[3] = (s3 << 11) | (s3 >>> 21);
    return result;
  }

  /** Uniform in [0, 1). */
  uniform(): number {
    return this.uint32() * 2 ** -32;
  }

  /** Mean 0, standard deviation 1. */
  gauss(): number {
    const spare = this.#spare;
    if (!Number.isNaN(spare)) {
      this.#spare = Number.NaN;
      return spare;
    }
    for (;;) {
      // Half a step off the grid, so that the square below is never zero.
      const u = (this.uint32() - 2147483647.5) / 2147483648;
      const v = (this.uint32() - 2147483647.5) / 2147483648;
      const q = u * u + v * v;
      if (q >= 1) continue;
      const k = Math.sqrt((-2 * Math.log(q)) / q);
      this.#spare = v * k;
      return u * k;
    }
  }

  /** Mean 1, exponentially distributed: the waiting time of a Poisson process in units of its mean. */
  exponential(): number {
    return -Math.log(1 - this.uniform());
  }
}
