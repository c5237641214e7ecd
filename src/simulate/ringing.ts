/**
 * Damped modes of the structure near a sensor, struck by impacts. Each mode is a complex state that turns and
 * decays; an impact adds to it. An impact between two samples is carried on to the next sample exactly, so its
 * time is not rounded to the sample grid.
 */

export interface Mode {
  readonly hz: number;
  /** Fraction of critical damping. */
  readonly damping: number;
  /** Share of the impact that this mode answers with. */
  readonly gain: number;
}

const silence = 1e-12;

export class Ringing {
  readonly #turnRe: Float64Array;
  readonly #turnIm: Float64Array;
  readonly #re: Float64Array;
  readonly #im: Float64Array;
  readonly #gain: Float64Array;
  readonly #decayPerS: Float64Array;
  readonly #radPerS: Float64Array;
  readonly #startRad: Float64Array;
  #quiet = true;

  constructor(modes: readonly Mode[], rateHz: number) {
    // A mode that the rate cannot carry would fold down; the sensor's anti-alias filter keeps it out.
    const carried = modes.filter((mode) => mode.hz < 0.45 * rateHz);
    const angular = carried.map((mode) => 2 * Math.PI * mode.hz * Math.sqrt(1 - mode.damping ** 2));
    const decay = carried.map((mode) => 2 * Math.PI * mode.hz * mode.damping);
    this.#radPerS = Float64Array.from(angular);
    this.#decayPerS = Float64Array.from(decay);
    // In this phase the ringing adds up to nothing: an impact between two parts of a machine leaves it no velocity.
    this.#startRad = Float64Array.from(angular, (w, k) => -Math.atan2(w, decay[k]!));
    this.#gain = Float64Array.from(carried, (mode) => mode.gain);
    this.#turnRe = Float64Array.from(angular, (w, k) => Math.exp(-decay[k]! / rateHz) * Math.cos(w / rateHz));
    this.#turnIm = Float64Array.from(angular, (w, k) => Math.exp(-decay[k]! / rateHz) * Math.sin(w / rateHz));
    this.#re = new Float64Array(carried.length);
    this.#im = new Float64Array(carried.length);
  }

  /** An impact that happened `agoS` before the sample that is rendered next. */
  strike(amplitude: number, agoS: number): void {
    for (let k = 0; k < this.#gain.length; k++) {
      const size = amplitude * this.#gain[k]! * Math.exp(-this.#decayPerS[k]! * agoS);
      const angle = this.#startRad[k]! + this.#radPerS[k]! * agoS;
      this.#re[k] = this.#re[k]! + size * Math.cos(angle);
      this.#im[k] = this.#im[k]! + size * Math.sin(angle);
    }
    this.#quiet = false;
  }

  /** Adds the ringing to out[from..to). */
  render(out: Float64Array, from: number, to: number): void {
    if (this.#quiet) return;
    let energy = 0;
    for (let k = 0; k < this.#gain.length; k++) {
      const c = this.#turnRe[k]!;
      const s = this.#turnIm[k]!;
      let re = this.#re[k]!;
      let im = this.#im[k]!;
      for (let i = from; i < to; i++) {
        out[i] = out[i]! + im;
        const next = re * c - im * s;
        im = re * s + im * c;
        re = next;
      }
      this.#re[k] = re;
      this.#im[k] = im;
      energy += re * re + im * im;
    }
    // Stopping far below a count keeps the state out of the slow denormal range.
    if (energy < silence * silence) {
      this.#quiet = true;
      this.#re.fill(0);
      this.#im.fill(0);
    }
  }
}
