/**
 * A stretch of one node's samples, copied out of its ring as they come: what lies before the event at once, so that a
 * node which restarts or falls silent cannot take it away, and the rest when it is there. All channels, aligned.
 */

import { RingReader } from '../link/ring.ts';
import type { Gap } from './tags.ts';

/** Gaps that are told apart; from there on everything counts as missing. */
const MAX_GAPS = 64;
/** Space between what is read and what is about to be overwritten. */
const MARGIN_SAMPLES = 4096;

export interface CaptureSource {
  memory: SharedArrayBuffer;
  epoch: number;
  /** Index of the epoch's first sample. */
  epochFirst: number;
}

export class Capture {
  /** Index of the first sample; later than asked where the ring held no more. */
  readonly first: number;
  readonly epoch: number;
  readonly #reader: RingReader;
  readonly #channels: readonly number[];
  readonly #gaps: Gap[] = [];
  #counts: Int32Array[];
  #samples = 0;
  #until: number;
  #cut = false;

  /**
   * @param channels of the ring, in the order in which they are wanted.
   * @param first index of the first sample wanted.
   * @param until index after the last.
   */
  constructor(source: CaptureSource, channels: readonly number[], first: number, until: number) {
    this.#reader = new RingReader(source.memory);
    this.epoch = source.epoch;
    const { head, samples } = this.#reader;
    const oldest = Math.max(source.epochFirst, head - samples + MARGIN_SAMPLES);
    this.first = Math.max(first, Math.min(oldest, head), 0);
    this.#channels = channels;
    this.#until = Math.max(until, this.first);
    this.#counts = channels.map(() => new Int32Array(this.#until - this.first));
    this.advance();
  }

  get until(): number {
    return this.#until;
  }

  /** Samples per channel so far. */
  get samples(): number {
    return this.#samples;
  }

  get bytes(): number {
    return this.#counts.reduce((sum, counts) => sum + counts.byteLength, 0);
  }

  /** Nothing more will come. */
  get done(): boolean {
    return this.#cut || this.first + this.#samples >= this.#until;
  }

  /** Wants more at the end; without effect once it is done. */
  extend(until: number): void {
    if (this.done || until <= this.#until) return;
    this.#until = until;
    this.#counts = this.#counts.map((counts) => {
      const longer = new Int32Array(until - this.first);
      longer.set(counts);
      return longer;
    });
  }

  /** Copies what has come. */
  advance(): void {
    if (this.done) return;
    const reader = this.#reader;
    const from = this.first + this.#samples;
    const n = Math.min(reader.head, this.#until) - from;
    // A head before the stretch belongs to another epoch.
    if (n === 0 && reader.epoch === this.epoch) return;
    const ok = n > 0 && this.#counts.every((counts, i) => this.#readOk(this.#channels[i]!, from, n, counts));
    if (!ok) {
      this.#cut = true;
      return;
    }
    this.#noteGaps(from, n);
    this.#samples += n;
  }

  /** Takes what there is: no more is waited for. */
  cut(): void {
    this.#cut = true;
  }

  /** The counts of each channel, handed over. */
  take(): { counts: Int32Array[]; gaps: readonly Gap[] } {
    const counts = this.#counts.map((channel) =>
      channel.length === this.#samples ? channel : channel.slice(0, this.#samples),
    );
    this.#counts = [];
    this.#cut = true;
    return { counts, gaps: this.#gaps };
  }

  #readOk(channel: number, from: number, n: number, counts: Int32Array): boolean {
    const into = counts.subarray(this.#samples, this.#samples + n);
    return this.#reader.read(this.epoch, channel, from, n, into) === 'ok';
  }

  /** The ring tells how many are missing within a stretch; halving finds which. */
  #noteGaps(from: number, n: number): void {
    const missing = this.#reader.missingWithin(from, n);
    if (missing === 0) return;
    if (missing < n) {
      const half = n >> 1;
      this.#noteGaps(from, half);
      this.#noteGaps(from + half, n - half);
      return;
    }
    const at = from - this.first;
    const last = this.#gaps.at(-1);
    if (last && (last.at + last.samples === at || this.#gaps.length >= MAX_GAPS))
      last.samples = at + n - last.at;
    else this.#gaps.push({ at, samples: n });
  }
}
