/** The lines of a spectrum that stand over its floor. */

import { localMaxima, median, runningMedian } from '../signal/peaks.ts';
import { lineAmplitude, type Spectrum } from '../signal/spectrum.ts';

export interface FloorLine {
  readonly hz: number;
  /** 20·log10 of its amplitude over the floor's. */
  readonly overFloorDb: number;
}

/** The floor at a place is the median of the spectrum over this stretch about it, which its lines do not lift. */
const FLOOR_HZ = 40;
/** Further below all that the record holds there is nothing but rounding. */
const DUST_DB = -100;
/** Skirt of a Hann line: −31.5 dB at 2.4/T and falling by 18 dB an octave (Harris 1978); a little above it. */
const SKIRT = { db: -25, atLines: 2.4, dbPerDecade: -60 };

/**
 * Local maxima at least `leastDb` over the floor that are no side lobes of a stronger line, and no dust.
 *
 * @param spectrum made with the Hann window.
 * @param wholeMeanSquare of the signal before anything was filtered or subtracted from it.
 * @returns by rising frequency.
 */
export function linesOverFloor(
  spectrum: Spectrum,
  bandHz: readonly [number, number],
  leastDb: number,
  wholeMeanSquare: number,
): FloorLine[] {
  const { meanSquare, binHz, lineHz } = spectrum;
  const last = Math.min(meanSquare.length - 2, Math.floor(bandHz[1] / binHz));
  const floor = runningMedian(meanSquare.slice(0, last + 2), Math.round(FLOOR_HZ / 2 / binHz));
  const leastOfAllDb = decibel(wholeMeanSquare) + DUST_DB;
  const candidates = localMaxima(meanSquare, { from: Math.ceil(bandHz[0] / binHz), to: last })
    .map((bin) => ({
      bin,
      db: decibel(meanSquare[bin]!),
      overFloorDb: decibel(meanSquare[bin]! / floor[bin]!),
    }))
    .filter(({ db, overFloorDb }) => overFloorDb >= leastDb && db >= leastOfAllDb)
    .sort((a, b) => b.db - a.db);
  const kept: typeof candidates = [];
  for (const candidate of candidates) {
    const hidden = kept.some(({ bin, db }) => {
      const lines = (Math.abs(candidate.bin - bin) * binHz) / lineHz;
      if (lines < SKIRT.atLines) return true;
      return candidate.db < db + SKIRT.db + SKIRT.dbPerDecade * Math.log10(lines / SKIRT.atLines);
    });
    if (!hidden) kept.push(candidate);
  }
  return kept
    .sort((a, b) => a.bin - b.bin)
    .map(({ bin, overFloorDb }) => ({ hz: lineAmplitude(spectrum, bin).hz, overFloorDb }));
}

/** How far the bin of a line stands over the floor about it, in dB. */
export function overFloorDb(spectrum: Spectrum, bin: number): number {
  const { meanSquare, binHz } = spectrum;
  const half = Math.round(FLOOR_HZ / 2 / binHz);
  return decibel(meanSquare[bin]! / median(meanSquare.slice(Math.max(1, bin - half), bin + half + 1)));
}

function decibel(power: number): number {
  return 10 * Math.log10(power);
}
