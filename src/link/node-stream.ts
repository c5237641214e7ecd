/**
 * What the frames of one line mean: which node is listened to, when its samples begin to belong together anew
 * (an epoch), and which are missing.
 *
 * Several nodes may speak on one line. The one listened to is the first whose DESCRIBE meets the expectation; it
 * stays so while it is heard. Samples of a node that does not meet the expectation go nowhere: two cables swapped
 * give no figures rather than those of another machine.
 *
 * An epoch begins with the first SAMPLES after a DESCRIBE that differs from the last, and where the index goes back
 * or jumps while the frame counter goes back (a restart). Any other jump of the index is a gap.
 */

import type { Expectation } from '../config/station.ts';
import { describeFrames, type NodeDescription } from './description.ts';
import { whyForeign } from './expectation.ts';
import type { DescribeFrame, Frame, HealthFrame, SampleFormat, SamplesFrame } from './frames.ts';
import { bytesPerCount, unpackCounts } from './unpack.ts';

/** Twice the longest time between two DESCRIBEs, and one second. */
const UNHEARD_MS = 5000;
/** Other nodes on the line that are told apart; more are counted together as node null. */
const MAX_OTHER_NODES = 8;
/** More than a frame holds: 8192 bytes of two-byte counts. */
const SCRATCH_COUNTS = 4096;

/** Why an epoch began: the first one, another DESCRIBE, a restart of the node, or a cut of unknown length. */
export type EpochCause = 'first' | 'described-anew' | 'restarted' | 'reconnected';

export interface NodeStreamHost {
  /** Samples from `firstIndex` on belong together and no longer with those before. */
  onEpoch(description: NodeDescription, firstIndex: number, because: EpochCause): void;
  /** The next n samples after those delivered are missing. */
  onGap(n: number): void;
  /** n samples; channel c's begin at planar[c × stride]. The array is reused. */
  onSamples(planar: Int32Array, stride: number, n: number): void;
}

/** Whether the line carries the node that it should. */
export type Standing =
  | { readonly kind: 'undescribed' }
  | { readonly kind: 'accepted'; readonly description: NodeDescription }
  | { readonly kind: 'foreign'; readonly description: NodeDescription; readonly why: string };

export interface OtherNode {
  readonly node: number | null;
  readonly frames: number;
}

type StreamError =
  | 'samples-before-describe'
  | 'samples-length'
  | 'index-beyond-2^53'
  | 'foreign-samples'
  | 'frames-lost'
  | 'counter-back';

export class NodeStream {
  readonly errors: Record<StreamError, number> = {
    'samples-before-describe': 0,
    'samples-length': 0,
    'index-beyond-2^53': 0,
    'foreign-samples': 0,
    'frames-lost': 0,
    'counter-back': 0,
  };
  #restarts = 0;
  #health: HealthFrame | null = null;
  readonly #expected: Expectation;
  readonly #host: NodeStreamHost;
  readonly #scratch = new Int32Array(SCRATCH_COUNTS);
  readonly #others = new Map<number | null, number>();
  #standing: Standing = { kind: 'undescribed' };
  /** The last DESCRIBE of the node listened to, for comparing. */
  #lastDescribe: DescribeFrame | null = null;
  /** A DESCRIBE must come before samples are taken: at the start, and after the line was cut. */
  #described = false;
  #epochDue: EpochCause | null = null;
  #nextIndex = 0;
  #lastCounter: number | null = null;
  #counterWentBack = false;
  #justReopened = false;
  #heardMs = Number.NEGATIVE_INFINITY;

  constructor(expected: Expectation, host: NodeStreamHost) {
    this.#expected = expected;
    this.#host = host;
  }

  get standing(): Standing {
    return this.#standing;
  }

  get restarts(): number {
    return this.#restarts;
  }

  /** When the node listened to last spoke; −∞: never. */
  get heardMs(): number {
    return this.#heardMs;
  }

  /** What the node last said of itself. */
  get health(): HealthFrame | null {
    return this.#health;
  }

  get otherNodes(): readonly OtherNode[] {
    return [...this.#others].map(([node, frames]) => ({ node, frames }));
  }

  /** The line was cut and is open again: whoever speaks now must say who it is first. */
  reopened(): void {
    this.#described = false;
    this.#justReopened = true;
  }

  accept(frame: Exclude<Frame, { kind: 'error' }>, nowMs: number): void {
    if (frame.kind === 'describe') {
      this.#describe(frame, nowMs);
      return;
    }
    if (!this.#described) {
      if (frame.kind === 'samples') this.errors['samples-before-describe']++;
      return;
    }
    if (frame.node !== this.#lastDescribe?.node) {
      this.#countOther(frame.node);
      return;
    }
    this.#heardMs = nowMs;
    this.#count(frame.counter);
    if (frame.kind === 'health') {
      this.#health = frame;
      return;
    }
    if (this.#standing.kind === 'accepted') this.#samples(frame, this.#lastDescribe);
    else this.errors['foreign-samples']++;
  }

  #describe(frame: DescribeFrame, nowMs: number): void {
    const last = this.#lastDescribe;
    const description = describeFrames(frame);
    const why = whyForeign(description, this.#expected);
    if (last && frame.node !== last.node && this.#described) {
      // Another node on the line. It is listened to where it is the better one, or the present one is gone.
      const present = this.#standing.kind === 'accepted' ? 1 : 0;
      const unheard = nowMs - this.#heardMs > UNHEARD_MS;
      if (!(why === null && present === 0) && !unheard) {
        this.#countOther(frame.node);
        return;
      }
    }
    if (frame.node !== last?.node) {
      this.#lastCounter = null;
      this.#health = null;
    }
    if (!last) this.#epochDue = 'first';
    else if (!sameDescribe(frame, last)) this.#epochDue = this.#epochDue ?? 'described-anew';
    this.#lastDescribe = frame;
    this.#described = true;
    this.#heardMs = nowMs;
    this.#count(frame.counter);
    this.#standing = why === null ? { kind: 'accepted', description } : { kind: 'foreign', description, why };
  }

  #samples(frame: SamplesFrame, described: DescribeFrame): void {
    const channels = described.channels.length;
    const { firstIndex, n, payload } = frame;
    if (payload.length !== n * channels * bytesPerCount(described.format)) {
      this.errors['samples-length']++;
      return;
    }
    if (firstIndex === null) {
      this.errors['index-beyond-2^53']++;
      return;
    }
    const back = firstIndex < this.#nextIndex;
    const jumped = firstIndex > this.#nextIndex;
    if (this.#epochDue === null && (back || (jumped && this.#counterWentBack))) {
      this.#restarts++;
      this.#epochDue = 'restarted';
    }
    this.#counterWentBack = false;
    if (this.#epochDue !== null) {
      this.#host.onEpoch(describeFrames(described), firstIndex, this.#epochDue);
      this.#epochDue = null;
    } else if (jumped) this.#host.onGap(firstIndex - this.#nextIndex);
    this.#nextIndex = firstIndex + n;
    this.#deliver(payload, described.format, channels, n);
  }

  #deliver(payload: Uint8Array, format: SampleFormat, channels: number, n: number): void {
    unpackCounts(payload, format, channels, n, this.#scratch, n);
    this.#host.onSamples(this.#scratch, n, n);
  }

  /** Frames that the counter says were sent and did not come. */
  #count(counter: number): void {
    if (this.#lastCounter !== null) {
      const missed = (counter - this.#lastCounter - 1) >>> 0;
      // What was sent while the line was cut is no error of the line.
      if (missed < 2 ** 31) this.errors['frames-lost'] += this.#justReopened ? 0 : missed;
      else {
        this.errors['counter-back']++;
        this.#counterWentBack = true;
      }
    }
    this.#lastCounter = counter;
    this.#justReopened = false;
  }

  #countOther(node: number): void {
    const key = this.#others.has(node) || this.#others.size < MAX_OTHER_NODES ? node : null;
    this.#others.set(key, (this.#others.get(key) ?? 0) + 1);
  }
}

function sameDescribe(a: DescribeFrame, b: DescribeFrame): boolean {
  return JSON.stringify({ ...a, counter: 0 }) === JSON.stringify({ ...b, counter: 0 });
}
