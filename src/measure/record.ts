import type { RateUsed } from './reading.ts';

/**
 * One contiguous stretch of one channel, with what is needed to measure it: the only input of a measurement
 * beside its plan. The same record gives the same reading, live, in a worker or in replay.
 *
 * The stretch includes what the decimation filters need at both ends, so a record needs no samples before its
 * first or after its last.
 */
export interface SampleRecord {
  /** Raw counts. */
  counts: Int32Array;
  /** The node's sample index of counts[0]. */
  firstIndex: number;
  unit: 'g' | 'm/s2';
  unitsPerCount: number;
  /** Counts at which the converter is at its limit; null: unknown. */
  countRange: readonly [number, number] | null;
  rate: RateUsed;
  /** The tachometer channel of the same node over the same samples; null: there is none. */
  tachometer: { counts: Int32Array; pulsesPerRev: number } | null;
  /** Shaft speed of the machine told from outside (MQTT, or a tachometer at another node); null: not told. */
  toldShaftHz: number | null;
  /** Whether the machine runs as told from outside; null: not told. */
  toldRunning: boolean | null;
  /** Samples missing within the stretch: above 0, every figure is null. */
  missingSamples: number;
  /** Reasons of the link why nothing can be trusted (foreign node, stale); each ends in `why`, figures null. */
  distrust: readonly string[];
}
