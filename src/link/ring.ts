/**
 * The ring of raw counts of one link, in shared memory: one thread writes, others read records out of it.
 *
 *   Int32 magic, epoch, channels, capacity (samples per channel)   bytes 0..15
 *   Int64 start: index of the epoch's first sample                 bytes 16..23
 *   Int64 head: index after the newest sample                      bytes 24..31
 *   gap table                                                      gap-table.ts
 *   Int32 counts, planar: channel c of sample i is at c × capacity + i mod capacity
 *
 * The writer stores counts first and the head after them, at most GUARD_SAMPLES at a time. The reader copies and
 * then looks at head and epoch again: samples within GUARD_SAMPLES of being overwritten count as gone, so a write
 * in progress cannot reach what was copied. The second look is a read-modify-write, which earlier plain reads
 * cannot slip behind on processors that reorder them.
 */

import { GAP_TABLE_BYTES, GapReader, GapWriter } from './gap-table.ts';

const MAGIC = 0x464f5249;
const MAGIC_AT = 0;
const EPOCH = 1;
const CHANNELS = 2;
const CAPACITY = 3;
const START = 0;
const HEAD = 1;
const POSITIONS_AT = 16;
const GAPS_AT = 32;
const COUNTS_AT = GAPS_AT + GAP_TABLE_BYTES;

/** Largest single write: more than a frame's. */
export const GUARD_SAMPLES = 8192;

export type ReadResult = 'ok' | 'not-yet' | 'overwritten' | 'other-epoch';

/** Bytes of a ring from which `samples` per channel can be read at any time. */
export function ringBytes(channels: number, samples: number): number {
  return COUNTS_AT + channels * (samples + GUARD_SAMPLES) * 4;
}

interface Views {
  readonly header: Int32Array;
  readonly positions: BigInt64Array;
  readonly counts: Int32Array;
  readonly channels: number;
  readonly capacity: number;
}

function viewsOf(memory: SharedArrayBuffer): Views {
  const header = new Int32Array(memory, 0, 4);
  if (header[MAGIC_AT] !== MAGIC) throw new TypeError('ring: this memory holds no ring');
  return {
    header,
    positions: new BigInt64Array(memory, POSITIONS_AT, 2),
    counts: new Int32Array(memory, COUNTS_AT),
    channels: header[CHANNELS]!,
    capacity: header[CAPACITY]!,
  };
}

/** The only writer of a ring. Indices are plain numbers, exact to 2^53. */
export class RingWriter {
  readonly memory: SharedArrayBuffer;
  readonly #views: Views;
  readonly #gaps: GapWriter;
  #epoch = 0;
  #head = 0;

  /** @param samples per channel that can be read back at any time. @throws RangeError for sizes that make no ring. */
  constructor(channels: number, samples: number) {
    if (!(channels >= 1 && samples >= 1))
      throw new RangeError('ring: needs at least one channel and one sample');
    this.memory = new SharedArrayBuffer(ringBytes(channels, Math.ceil(samples)));
    const header = new Int32Array(this.memory, 0, 4);
    header[MAGIC_AT] = MAGIC;
    header[CHANNELS] = channels;
    header[CAPACITY] = Math.ceil(samples) + GUARD_SAMPLES;
    this.#views = viewsOf(this.memory);
    this.#gaps = new GapWriter(this.memory, GAPS_AT);
  }

  get channels(): number {
    return this.#views.channels;
  }

  get head(): number {
    return this.#head;
  }

  get gapsJoined(): number {
    return this.#gaps.joined;
  }

  /** Samples before and after do not belong together: readers of another epoch get nothing from here on. */
  beginEpoch(epoch: number, firstIndex: number): void {
    const { header, positions } = this.#views;
    this.#epoch = epoch;
    this.#head = checkedIndex(firstIndex);
    // No reader asks for the new epoch before it was told of it, which is after this returns.
    Atomics.store(header, EPOCH, epoch);
    this.#gaps.clear();
    Atomics.store(positions, START, BigInt(firstIndex));
    Atomics.store(positions, HEAD, BigInt(firstIndex));
  }

  /** Appends n samples; channel c's begin at planar[c × stride]. */
  append(planar: Int32Array, stride: number, n: number): void {
    if (this.#epoch === 0) throw new RangeError('ring: begin an epoch before appending');
    const { counts, channels, capacity } = this.#views;
    this.#advance(n, (offset, at, length) => {
      for (let c = 0; c < channels; c++) {
        const from = c * stride + offset;
        counts.set(planar.subarray(from, from + length), c * capacity + at);
      }
    });
  }

  /** The next n samples are missing: zeros stand in their place, so that nothing old shows through. */
  skip(n: number): void {
    const { positions, counts, channels, capacity } = this.#views;
    const start = this.#head;
    const end = checkedIndex(start + n);
    this.#gaps.add(start, end, end - capacity);
    const jump = Math.max(0, n - capacity);
    if (jump > 0) {
      // Told before anything is overwritten: a reader of the old samples must find them gone.
      this.#head += jump;
      Atomics.store(positions, HEAD, BigInt(this.#head));
    }
    this.#advance(n - jump, (_offset, at, length) => {
      for (let c = 0; c < channels; c++) counts.fill(0, c * capacity + at, c * capacity + at + length);
    });
  }

  #advance(n: number, write: (offset: number, at: number, length: number) => void): void {
    checkedIndex(this.#head + n);
    const { positions, capacity } = this.#views;
    let offset = 0;
    while (offset < n) {
      const at = this.#head % capacity;
      const length = Math.min(n - offset, capacity - at, GUARD_SAMPLES);
      write(offset, at, length);
      offset += length;
      this.#head += length;
      Atomics.store(positions, HEAD, BigInt(this.#head));
    }
  }
}

function checkedIndex(index: number): number {
  if (!Number.isSafeInteger(index)) throw new RangeError(`ring: sample index ${index} is beyond 2^53`);
  return index;
}

/** Reads records out of a ring, from any thread. */
export class RingReader {
  readonly channels: number;
  readonly #views: Views;
  readonly #gaps: GapReader;

  /** @throws TypeError where the memory is no ring. */
  constructor(memory: SharedArrayBuffer) {
    this.#views = viewsOf(memory);
    this.#gaps = new GapReader(memory, GAPS_AT);
    this.channels = this.#views.channels;
  }

  /** Samples per channel that can be read back at any time. */
  get samples(): number {
    return this.#views.capacity - GUARD_SAMPLES;
  }

  get epoch(): number {
    return Atomics.load(this.#views.header, EPOCH);
  }

  get head(): number {
    return Number(Atomics.load(this.#views.positions, HEAD));
  }

  /**
   * Copies n samples of one channel, from `firstIndex` on, to the head of `into`. Other than at `ok`, what `into`
   * holds is worthless. Missing samples read as 0: ask `missingWithin`, after the read.
   */
  read(epoch: number, channel: number, firstIndex: number, n: number, into: Int32Array): ReadResult {
    const { header, positions, counts, capacity } = this.#views;
    if (!(channel >= 0 && channel < this.channels)) throw new RangeError(`ring: no channel ${channel}`);
    if (n > into.length) throw new RangeError(`ring: ${n} samples do not fit into ${into.length}`);
    if (Atomics.load(header, EPOCH) !== epoch) return 'other-epoch';
    const start = Number(Atomics.load(positions, START));
    const head = this.head;
    if (firstIndex < Math.max(start, head - this.samples)) return 'overwritten';
    if (firstIndex + n > head) return 'not-yet';
    const base = channel * capacity;
    const at = firstIndex % capacity;
    const toEnd = Math.min(n, capacity - at);
    into.set(counts.subarray(base + at, base + at + toEnd));
    if (toEnd < n) into.set(counts.subarray(base, base + n - toEnd), toEnd);
    const headAfter = Number(Atomics.add(positions, HEAD, 0n));
    if (Atomics.add(header, EPOCH, 0) !== epoch) return 'other-epoch';
    return firstIndex < headAfter - this.samples ? 'overwritten' : 'ok';
  }

  /** How many of the samples [firstIndex, firstIndex + n) of the present epoch never came. */
  missingWithin(firstIndex: number, n: number): number {
    return this.#gaps.missingWithin(firstIndex, n);
  }
}
