import type { NodeDescription } from './description.ts';
import type { HealthFrame } from './frames.ts';
import type { OtherNode } from './node-stream.ts';
import type { RateEstimate } from './rate-estimate.ts';

/** How a link is doing. `why` is for a person. Only while `receiving` may its figures be believed. */
export interface LinkCondition {
  readonly kind:
    | 'stopped'
    /** Not open yet, or open and nothing judged yet. */
    | 'waiting'
    | 'receiving'
    /** It cannot be opened. */
    | 'refused'
    | 'unplugged'
    /** Open, but no bytes come. */
    | 'silent'
    /** Bytes come that are no frames or lines: another baud rate or format. */
    | 'no-frames'
    /** Frames come, but no samples. */
    | 'no-samples'
    | 'foreign-node'
    /** What the node describes needs more memory than a link is given. */
    | 'too-large';
  readonly why: string;
  /** Monotonic time since when. */
  readonly sinceMs: number;
}

/** Counters run from the start of the agent. */
export interface LinkHealth {
  readonly condition: LinkCondition;
  readonly bytesPerS: number;
  readonly bytes: number;
  /** Good frames, or lines taken as samples. */
  readonly frames: number;
  readonly errors: Readonly<Record<string, number>>;
  readonly node: NodeDescription | null;
  readonly nodeHealth: HealthFrame | null;
  readonly otherNodes: readonly OtherNode[];
  readonly rate: RateEstimate | null;
  /** What was measured, whether or not it is good enough to be used. */
  readonly measuredRate: { readonly hz: number; readonly ppm: number } | null;
  readonly epoch: number;
  /** Index after the newest sample. */
  readonly head: number;
  readonly gaps: number;
  readonly missingSamples: number;
  readonly restarts: number;
  /** By channel name: samples at the limits of the converter. */
  readonly overRange: Readonly<Record<string, number>>;
  readonly opened: number;
  readonly refused: number;
  readonly silent: number;
  readonly unplugged: number;
}
