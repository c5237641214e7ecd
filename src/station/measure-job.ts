/** What passes between the main thread and the measuring worker: small, typed, without samples. */

import type { Machine, Point } from '../config/station.ts';
import type { RateUsed, Reading } from '../measure/reading.ts';

export interface MeasuringSetup {
  points: readonly { point: Point; machine: Machine }[];
  mainsHz: number;
}

/** A stretch of one channel in the ring of a link. */
export interface RingSpan {
  link: string;
  epoch: number;
  channel: number;
  first: number;
  samples: number;
}

export interface MeasureJob {
  id: number;
  pointKey: string;
  span: RingSpan;
  nominalRateHz: number;
  rate: RateUsed;
  unit: 'g' | 'm/s2';
  unitsPerCount: number;
  countRange: readonly [number, number] | null;
  /** The channel of the same ring that carries the machine's tachometer. */
  tachometer: { channel: number; pulsesPerRev: number } | null;
  /** The newest stretch of a tachometer at another node. */
  otherTachometer: { span: RingSpan; pulsesPerRev: number; rate: RateUsed } | null;
  toldShaftHz: number | null;
  toldRunning: boolean | null;
  distrust: readonly string[];
}

export type ToWorker =
  /** Takes the place of what the worker was started with. */
  | { kind: 'setup'; setup: MeasuringSetup }
  /** null: the link is gone. */
  | { kind: 'ring'; link: string; memory: SharedArrayBuffer | null }
  | { kind: 'measure'; job: MeasureJob };

/**
 * `missed`: why there is no reading; the record is counted as lost. `failed`: measuring itself broke, as it may again
 * with each record of the point.
 */
export type MeasureOutcome =
  | { id: number; reading: Reading }
  | { id: number; missed: string; failed?: boolean };
