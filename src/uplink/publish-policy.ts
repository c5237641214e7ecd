/** When a reading is worth its bytes. Pure: the caller keeps what was sent last and brings the time. */

import type { Reading } from '../measure/reading.ts';

export interface PublishSettings {
  readonly changePct: number;
  readonly minIntervalS: number;
  readonly atLeastS: number;
}

/** What the last reading that was sent said, and when (monotonic seconds). */
export interface LastSent {
  readonly atS: number;
  readonly zone: string | null;
  readonly defect: string | null;
  readonly quality: string;
  readonly figures: Readonly<Record<string, number | null>>;
}

export type SendReason = 'first' | 'zone' | 'defect' | 'change' | 'due';

/**
 * Below these a figure is the sensor's noise, and a change is taken relative to them. Common practice, no source:
 * about a tenth of what a healthy pump shows.
 */
const noise = { velocityMmS: 0.2, accelerationG: 0.01, envelopeG2: 1e-4 } as const;

/** null: not worth it. A zone or a defect that changes always is; a figure that moved only after the least interval. */
export function whySend(
  last: LastSent | null,
  reading: Reading,
  nowS: number,
  settings: PublishSettings,
): SendReason | null {
  if (last === null) return 'first';
  const now = lastSentOf(reading, nowS);
  if (now.zone !== last.zone) return 'zone';
  if (now.defect !== last.defect) return 'defect';
  const sinceS = nowS - last.atS;
  if (sinceS >= settings.atLeastS) return 'due';
  if (sinceS < settings.minIntervalS) return null;
  return now.quality !== last.quality || moved(last, now, settings.changePct / 100) ? 'change' : null;
}

export function lastSentOf(reading: Reading, atS: number): LastSent {
  const figures: Record<string, number | null> = {
    'acceleration.rms': reading.acceleration.rms,
    'envelope.mean': reading.envelope?.mean ?? null,
  };
  for (const [key, value] of Object.entries(reading.velocity)) {
    if (typeof value !== 'string') figures[`velocity.${key}`] = value;
  }
  return {
    atS,
    zone: reading.zone,
    defect: reading.envelope?.defect ?? null,
    quality: reading.quality,
    figures,
  };
}

function moved(last: LastSent, now: LastSent, share: number): boolean {
  const keys = new Set([...Object.keys(last.figures), ...Object.keys(now.figures)]);
  for (const key of keys) {
    const before = last.figures[key] ?? null;
    const after = now.figures[key] ?? null;
    if (before === null || after === null) {
      if (before !== after) return true;
    } else if (Math.abs(after - before) > share * yardstick(key, last, before)) return true;
  }
  return false;
}

/** A band is measured against the whole: a fifth of a quarter of the vibration is no news. */
function yardstick(key: string, last: LastSent, before: number): number {
  if (key.startsWith('velocity.')) {
    return Math.max(noise.velocityMmS, last.figures['velocity.overall'] ?? 0, before);
  }
  return Math.max(before, key === 'envelope.mean' ? noise.envelopeG2 : noise.accelerationG);
}
