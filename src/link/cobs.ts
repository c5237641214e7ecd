/**
 * Consistent overhead byte stuffing (Cheshire and Baker 1999), as a stream: bytes in whatever pieces they arrive,
 * whole decoded frames out. The delimiter is 0x00.
 *
 * Invariants: memory is bounded by one frame; work is linear in the bytes pushed, however they are split; a frame
 * that is too long or breaks the code is dropped and counted, and the next delimiter starts afresh.
 */

/** Longest decoded frame of the sensor link, in bytes. */
export const MAX_FRAME_BYTES = 8192;

/** One code byte a run of 254, one for the rest, and one that some encoders add after a last full run. */
const MAX_ENCODED_BYTES = MAX_FRAME_BYTES + Math.ceil(MAX_FRAME_BYTES / 254) + 1;

/** Shorter runs are copied by a loop: a call into the engine costs more than it saves. */
const LOOP_COPY_BYTES = 24;

/**
 * Decodes encoded[start..end), without delimiter, to the head of `into`.
 *
 * Returns the decoded length, or -1 where the last run says more bytes than there are. `into` must hold
 * end − start bytes. A last run of exactly 254 bytes may be followed by an empty run (01) or not.
 */
export function cobsDecode(encoded: Uint8Array, start: number, end: number, into: Uint8Array): number {
  let from = start;
  let to = 0;
  while (from < end) {
    const code = encoded[from++]!;
    const runEnd = from + code - 1;
    if (code === 0 || runEnd > end) return -1;
    if (code <= LOOP_COPY_BYTES) {
      while (from < runEnd) into[to++] = encoded[from++]!;
    } else {
      into.set(encoded.subarray(from, runEnd), to);
      to += code - 1;
      from = runEnd;
    }
    if (code !== 255 && from < end) into[to++] = 0;
  }
  return to;
}

/** Cuts a byte stream into frames. A frame handed on is a view that holds until the next one. */
export class Deframer {
  /** Why frames were dropped here. */
  readonly errors = { oversize: 0, cobs: 0 };
  readonly #onFrame: (frame: Uint8Array) => void;
  readonly #encoded = new Uint8Array(MAX_ENCODED_BYTES);
  /** Decoding writes at most as much as it reads. */
  readonly #decoded = new Uint8Array(MAX_ENCODED_BYTES);
  #held = 0;
  #discarding = false;

  constructor(onFrame: (frame: Uint8Array) => void) {
    this.#onFrame = onFrame;
  }

  push(chunk: Uint8Array): void {
    let from = 0;
    while (from < chunk.length) {
      const zero = chunk.indexOf(0, from);
      const end = zero < 0 ? chunk.length : zero;
      if (!this.#discarding && this.#held + end - from > MAX_ENCODED_BYTES) {
        this.#discarding = true;
        this.errors.oversize++;
      }
      if (zero < 0) {
        this.#keep(chunk, from, end);
        return;
      }
      if (this.#discarding) this.#discarding = false;
      else if (this.#held === 0) this.#finish(chunk, from, end);
      else {
        this.#keep(chunk, from, end);
        this.#finish(this.#encoded, 0, this.#held);
      }
      this.#held = 0;
      from = zero + 1;
    }
  }

  /** Forgets a half-received frame: what follows comes from a new connection. */
  reset(): void {
    this.#held = 0;
    this.#discarding = false;
  }

  #keep(chunk: Uint8Array, from: number, end: number): void {
    if (this.#discarding) return;
    this.#encoded.set(chunk.subarray(from, end), this.#held);
    this.#held += end - from;
  }

  #finish(encoded: Uint8Array, start: number, end: number): void {
    if (start === end) return;
    const length = cobsDecode(encoded, start, end, this.#decoded);
    if (length < 0) this.errors.cobs++;
    else if (length > MAX_FRAME_BYTES) this.errors.oversize++;
    else this.#onFrame(this.#decoded.subarray(0, length));
  }
}
