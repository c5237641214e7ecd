/**
 * What one record tells of the sensor's mount. A mount that comes loose shows as its own resonance, falling, or as high
 * frequencies that no longer reach the sensor. One record cannot tell that resonance from one of the machine, so it
 * only gives `acceleration.mean_hz` for a rule to watch; but that nothing at all arrives, it can tell.
 */

import type { EnvelopeReading } from './reading.ts';

/** Rounding to whole counts makes white noise of q²/12 (Bennett 1948); below twice that there is nothing else. */
const OVER_ROUNDING = 2;

/**
 * Whether a band holds nothing but the rounding of the counts.
 *
 * @param envelope of the band: half the mean of the squared envelope is the band's mean square.
 * @param gPerCount of the record.
 * @param rateHz of the record.
 */
export function isSilent(envelope: EnvelopeReading, gPerCount: number, rateHz: number): boolean {
  const [low, high] = envelope.band_hz;
  const rounding = ((gPerCount * gPerCount) / 12) * ((high - low) / (rateHz / 2));
  return envelope.mean !== null && envelope.mean / 2 < OVER_ROUNDING * rounding;
}
