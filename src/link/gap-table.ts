/**
 * Which samples of an epoch are missing: a bounded table in shared memory, written by the thread that receives
 * and read by the ones that measure.
 *
 *   Int32 version (odd while being written), Int32 count, then `count` × { start, end } as Int64, oldest first
 *
 * When full, the two oldest gaps become one that spans both: samples between them then count as missing though
 * they are there. A figure too few, never a wrong one.
 */

export const GAP_TABLE_ENTRIES = 256;
const HEADER_BYTES = 8;
export const GAP_TABLE_BYTES = HEADER_BYTES + GAP_TABLE_ENTRIES * 16;

const VERSION = 0;
const COUNT = 1;
const MAX_ATTEMPTS = 1000;

interface Views {
  readonly header: Int32Array;
  readonly entries: BigInt64Array;
}

function viewsOf(memory: SharedArrayBuffer, byteOffset: number): Views {
  return {
    header: new Int32Array(memory, byteOffset, 2),
    entries: new BigInt64Array(memory, byteOffset + HEADER_BYTES, GAP_TABLE_ENTRIES * 2),
  };
}

export class GapWriter {
  /** Times that two gaps had to be joined. */
  joined = 0;
  readonly #views: Views;
  #gaps: { start: number; end: number }[] = [];

  constructor(memory: SharedArrayBuffer, byteOffset: number) {
    this.#views = viewsOf(memory, byteOffset);
  }

  clear(): void {
    this.#gaps = [];
    this.#publish();
  }

  /** Notes that samples [start, end) are missing; those before `oldest` are out of the ring and forgotten. */
  add(start: number, end: number, oldest: number): void {
    const gaps = this.#gaps.filter((gap) => gap.end > oldest);
    const last = gaps.at(-1);
    if (last && last.end === start) last.end = end;
    else gaps.push({ start, end });
    if (gaps.length > GAP_TABLE_ENTRIES) {
      gaps[1]!.start = gaps[0]!.start;
      gaps.shift();
      this.joined++;
    }
    this.#gaps = gaps;
    this.#publish();
  }

  #publish(): void {
    const { header, entries } = this.#views;
    Atomics.add(header, VERSION, 1);
    this.#gaps.forEach((gap, i) => {
      Atomics.store(entries, 2 * i, BigInt(gap.start));
      Atomics.store(entries, 2 * i + 1, BigInt(gap.end));
    });
    Atomics.store(header, COUNT, this.#gaps.length);
    Atomics.add(header, VERSION, 1);
  }
}

export class GapReader {
  readonly #views: Views;

  constructor(memory: SharedArrayBuffer, byteOffset: number) {
    this.#views = viewsOf(memory, byteOffset);
  }

  /** How many of the samples [first, first + n) are missing; all of them where the table cannot be read. */
  missingWithin(first: number, n: number): number {
    const { header, entries } = this.#views;
    for (let attempt = 0; attempt < MAX_ATTEMPTS; attempt++) {
      const version = Atomics.load(header, VERSION);
      if (version % 2 !== 0) continue;
      const count = Math.min(Atomics.load(header, COUNT), GAP_TABLE_ENTRIES);
      let missing = 0;
      for (let i = 0; i < count; i++) {
        const start = Math.max(first, Number(Atomics.load(entries, 2 * i)));
        const end = Math.min(first + n, Number(Atomics.load(entries, 2 * i + 1)));
        if (end > start) missing += end - start;
      }
      if (Atomics.load(header, VERSION) === version) return missing;
    }
    return n;
  }
}
