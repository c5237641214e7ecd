/** The sizes of an envelope measurement: the band that the rate and the sensor leave, its spectrum, its length. */

import type { Point } from '../config/station.ts';
import { hz, LEAST_AVERAGES, type PlanNotes, RATE_OVER_FMAX, range } from './plan-notes.ts';

/** Cut from each end of a squared envelope, where the band's filter has not settled. */
export const ENVELOPE_EDGE_S = 0.05;
/** A spectrum is averaged over two half-overlapped blocks at least; a shorter record gets wider lines instead. */
const LEAST_BLOCKS = 1.5;
/**
 * A bearing is judged on blocks of so many turns at least: with fewer a line is wider than the distance of one bearing's
 * cage from another's, or of a race from the shaft.
 */
export const LEAST_TURNS = 20;
/** Bearing tones lie about 500 Hz to 16 kHz (common practice, no source). */
const AUTO_LOW_HZ = 500;
const LEAST_FMAX_HZ = 500;

export interface EnvelopePlan {
  /** The band, or with `auto` the limits within which spectral kurtosis chooses it. */
  readonly bandHz: readonly [number, number];
  readonly auto: boolean;
  readonly fmaxHz: number;
  readonly lines: number;
  readonly lineHz: number;
  readonly blockS: number;
  readonly averages: number;
}

/** The longest block, in seconds, of which a record holds two. */
export function longestBlockS(samples: number, rateHz: number): number {
  return (samples / rateHz - 2 * ENVELOPE_EDGE_S) / LEAST_BLOCKS;
}

/**
 * Plans the envelope of a point.
 *
 * @param bpfiHz the highest inner race pass frequency to be covered; 0: no bearing is known.
 * @returns null where rate and sensor leave nothing of the band.
 */
export function planEnvelope(
  point: Point,
  bpfiHz: number,
  rateHz: number,
  notes: PlanNotes,
): EnvelopePlan | null {
  const asked = point.measure.envelope;
  const carriedHz = rateHz / RATE_OVER_FMAX;
  const usable = point.sensor.usableHz ?? [0, Number.POSITIVE_INFINITY];
  const [askedLow, askedHigh] = asked.bandHz === 'auto' ? [AUTO_LOW_HZ, carriedHz] : asked.bandHz;
  const low = Math.max(askedLow, usable[0]);
  const high = Math.min(askedHigh, carriedHz, usable[1]);
  const cause =
    usable[1] < carriedHz || low > askedLow
      ? `the sensor is usable over ${range(usable)}`
      : `a rate of ${hz(rateHz)} carries ${hz(carriedHz)}`;
  if (high <= low) {
    notes.caution(`no envelope: ${cause}, its band is ${range([askedLow, askedHigh])}`);
    return null;
  }
  if (low > askedLow || high < askedHigh) {
    notes.warn(`envelope band ${range([askedLow, askedHigh])} is cut to ${range([low, high])}: ${cause}`);
  }
  const fmaxHz = asked.fmaxHz === 'auto' ? Math.max(LEAST_FMAX_HZ, 3.5 * bpfiHz) : asked.fmaxHz;
  if (fmaxHz > high - low) {
    notes.warn(
      `the envelope band is ${hz(high - low)} wide, its spectrum holds nothing above that: Fmax ${hz(fmaxHz)} is too high`,
    );
  }
  const lineHz = fmaxHz / asked.lines;
  return {
    bandHz: [low, high],
    auto: asked.bandHz === 'auto',
    fmaxHz,
    lines: asked.lines,
    lineHz,
    blockS: 1 / lineHz,
    averages: Math.max(LEAST_AVERAGES, asked.averages),
  };
}
