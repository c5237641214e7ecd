/**
 * A stretch of one node's samples, copied out of its ring as they come: what lies before the event at once, so that a
 * node which restarts or falls silent cannot take it away, and the rest when it is there. All channels, aligned. Runs on
 * the thread that writes the ring, so all that the ring holds can be read.
 */

import { RingReader } from '../link/ring.ts';
import type { Gap } from './tags.ts';

/** Gaps that are told apart; from there on everything counts as missing. */
const MAX_GAPS = 64;

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
  /** null: nothing more will come. It is let go of then, for its link may be gone and the ring is large. */
  #reader: RingReader | null;
  readonly #channels: readonly number[];
  readonly #gaps: Gap[] = [];
  #counts: Int32Array[];
  #samples = 0;
  #until: number;

  /**
   * @param channels of the ring, in the order in which they are wanted.
   * @param first index of the first sample wanted.
   * @param until index after the last.
   */
  constructor(source: CaptureSource, channels: readonly number[], first: number, until: number) {
    const reader = new RingReader(source.memory);
    this.#reader = reader;
    this.epoch = source.epoch;
    const { head, samples } = reader;
    const oldest = Math.max(source.epochFirst, head - samples);
    this.first = Math.max(first, Math.min(oldest, head), 0);
    this.#channels = channels;
    this.#until = Math.max(until, this.first);
    this.#counts = channels.map(() => new Int32Array(this.#until - this.first));
    this.advance();
  }

  /** Index after the last sample that it holds, or waits for. */
  get until(): number {
    return this.done ? this.first + this.#samples : this.#until;
  }

  /** Samples per channel so far. */
  get samples(): number {
    return this.#samples;
  }

  get channels(): number {
    return this.#channels.length;
  }

  get bytes(): number {
    return this.#counts.reduce((sum, counts) => sum + counts.byteLength, 0);
  }

  /** Nothing more will come. */
  get done(): boolean {
    return this.#reader === null;
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
    const reader = this.#reader;
    if (reader === null) return;
    const from = this.first + this.#samples;
    const n = Math.min(reader.head, this.#until) - from;
    // A head before the stretch belongs to another epoch.
    if (n === 0 && from < this.#until && reader.epoch === this.epoch) return;
    const read = (counts: Int32Array, i: number) =>
      reader.read(this.epoch, this.#channels[i]!, from, n, counts.subarray(this.#samples)) === 'ok';
    const ok = n > 0 && this.#counts.every(read);
    if (ok) {
      this.#noteGaps(reader, from, n);
      this.#samples += n;
    }
    if (!ok || from + n >= this.#until) this.cut();
  }

  /** Takes what there is: no more is waited for. */
  cut(): void {
    this.#reader = null;
  }

  /** The counts of each channel, handed over. */
  take(): { counts: Int32Array[]; gaps: readonly Gap[] } {
    const counts = this.#counts.map((channel) =>
      channel.length === this.#samples ? channel : channel.slice(0, this.#samples),
    );
    this.#counts = [];
    this.cut();
    return { counts, gaps: this.#gaps };
  }

  /** The ring tells how many are missing within a stretch; halving finds which. */
  #noteGaps(reader: RingReader, from: number, n: number): void {
    const missing = reader.missingWithin(from, n);
    if (missing === 0) return;
    if (missing < n) {
      const half = n >> 1;
      this.#noteGaps(reader, from, half);
      this.#noteGaps(reader, from + half, n - half);
      return;
    }
    const at = from - this.first;
    const last = this.#gaps.at(-1);
    if (last && (last.at + last.samples === at || this.#gaps.length >= MAX_GAPS))
      last.samples = at + n - last.at;
    else this.#gaps.push({ at, samples: n });
  }
}
