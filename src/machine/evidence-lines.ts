/**
 * The evidence that the bearing judgement wants: lines of envelope spectra, already picked and cleared of what the
 * shaft and other known sources explain. No samples come here.
 */

/** One line of the spectrum of a squared envelope that was divided by its own mean. */
export interface EnvelopeLine {
  readonly hz: number;
  /** Amplitude over the mean of the squared envelope: how deeply the vibration power is modulated. */
  readonly depth: number;
}

/** The lines of one band at one resolution, by rising frequency. */
export interface LineSet {
  /** 1 / T of the averaged blocks, in hertz. */
  readonly resolutionHz: number;
  readonly lines: readonly EnvelopeLine[];
}

/** One band of the vibration, its envelope seen with long blocks and with blocks a quarter as long. */
export interface BandLines {
  readonly bandHz: readonly [number, number];
  readonly fine: LineSet;
  readonly coarse: LineSet;
}

/**
 * The multiple of the shaft or of another known source that stands at a frequency.
 *
 * @param hz where, in hertz
 * @param shaftHz shaft speed in hertz
 * @param foreignHz fundamentals of other known sources in hertz (twice mains, other shafts)
 * @param resolutionHz 1/T of the spectrum in hertz
 * @returns the frequency of that multiple if it lies within 0.75 Hz (5 % of a fundamental below 15 Hz) or 1/T, whichever
 *   is wider; else null
 * Source: separating the shaft's lines first is step one of Randall and Antoni 2011 (from memory); the width is our own.
 * Worked: shaft 30 Hz, 1/T 0.4 Hz: 60.6 Hz belongs to 60 Hz, 107.5 Hz to nothing; with a foreign 100 Hz, 200.5 Hz to 200 Hz.
 */
export function knownSourceAt(
  hz: number,
  shaftHz: number,
  foreignHz: readonly number[],
  resolutionHz: number,
): number | null {
  for (const fundamental of [shaftHz, ...foreignHz]) {
    const width = Math.max(Math.min(0.75, 0.05 * fundamental), resolutionHz);
    const multiple = Math.round(hz / fundamental) * fundamental;
    if (multiple > 0 && Math.abs(hz - multiple) <= width) return multiple;
  }
  return null;
}

/**
 * Removes the lines that something other than a bearing explains.
 *
 * @param set lines of one spectrum
 * @param shaftHz shaft speed in hertz
 * @param foreignHz fundamentals of other known sources in hertz
 * @returns the lines left: those of `knownSourceAt` are gone, and those below 0.3 × shaft, where only drift and
 *   beating live (a cage turns at 0.33 to 0.45 × shaft)
 * Worked: see `knownSourceAt`.
 */
export function withoutKnownSources(set: LineSet, shaftHz: number, foreignHz: readonly number[]): LineSet {
  const lines = set.lines.filter(
    ({ hz }) => hz >= 0.3 * shaftHz && knownSourceAt(hz, shaftHz, foreignHz, set.resolutionHz) === null,
  );
  return { resolutionHz: set.resolutionHz, lines };
}
