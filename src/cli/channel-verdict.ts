/** What a second of one channel looks like to whoever mounts the sensor. */

import type { ChannelDescription } from '../link/description.ts';
import { clippedSamples } from '../measure/clipping.ts';
import { GRAVITY_M_S2 } from '../signal/integrate.ts';
import { statistics } from '../signal/statistics.ts';

export interface ChannelVerdict {
  /** Without the mean, in the unit of the channel. */
  rms: number;
  peak: number;
  verdict: string;
}

/** No machine that is still in one piece shakes like this; a scale that is off by g does. */
const ABSURD_RMS_G = 50;
/** Gravity on an axis that stands upright, as a sensor with a response down to 0 Hz reads it. */
const GRAVITY_TOLERANCE = 0.05;

export function channelVerdict(
  counts: Int32Array,
  channel: ChannelDescription,
  rangeG: number | null,
): ChannelVerdict {
  let sum = 0;
  for (const count of counts) sum += count;
  const mean = (sum / counts.length) * channel.unitsPerCount;
  const values = Float64Array.from(counts, (count) => count * channel.unitsPerCount - mean);
  const { rms, peak } = statistics(values);
  return { rms, peak, verdict: verdictOf(counts, channel, { mean, rms, peak }, rangeG) };
}

function verdictOf(
  counts: Int32Array,
  { unit, countRange }: ChannelDescription,
  { mean, rms, peak }: { mean: number; rms: number; peak: number },
  rangeG: number | null,
): string {
  if (unit === 'logic') return pulses(counts);
  if (counts.every((count) => count === counts[0])) return 'flat: the counts never change';
  const limits = countRange ?? [Number.NEGATIVE_INFINITY, Number.POSITIVE_INFINITY];
  const perG = unit === 'm/s2' ? GRAVITY_M_S2 : 1;
  const beyond = rangeG !== null && peak / perG > rangeG;
  if (
    beyond ||
    counts.some((count) => count <= limits[0] || count >= limits[1]) ||
    clippedSamples(counts) > 0
  ) {
    return 'clipped: beyond what the converter or the sensor can measure';
  }
  const otherGravity = unit === 'g' ? GRAVITY_M_S2 : 1;
  if (rms / perG > ABSURD_RMS_G || Math.abs(Math.abs(mean) / otherGravity - 1) < GRAVITY_TOLERANCE) {
    return `wrong unit? the figures do not look like ${unit === 'g' ? 'g' : 'm/s²'}`;
  }
  return 'ok';
}

function pulses(counts: Int32Array): string {
  let edges = 0;
  for (let i = 1; i < counts.length; i++) if (counts[i]! > 0 && counts[i - 1]! <= 0) edges++;
  return edges === 0 ? 'silent: no pulses' : `ok: ${edges} pulses in a second`;
}
