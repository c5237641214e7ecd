/**
 * Reads a PCM WAV file (RIFF/WAVE) in stretches, as integer counts.
 *
 * Layout: `RIFF` size `WAVE`, then chunks of a four-letter id, a little-endian u32 size and that many bytes, padded
 * to even. `fmt ` says format (1 = PCM, 0xFFFE = extensible, with the true format in the first two bytes of its
 * GUID), channels, rate, and bits; `data` holds the samples interleaved by channel, little-endian, signed.
 * A size of 0 or 0xFFFFFFFF in `data` (a recorder that never came back to fill it in) means: to the end of the file.
 */

import { closeSync, fstatSync, openSync, readSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';

const maxChannels = 64;
const maxChunks = 64;

export interface WavFormat {
  channels: number;
  rateHz: number;
  bitsPerSample: 16 | 24 | 32;
  /** Samples per channel. */
  frames: number;
}

export class WavFile {
  readonly format: WavFormat;
  readonly #path: string;
  readonly #fd: number;
  readonly #dataAt: number;

  /** @throws ForebayError `file.unreadable` or `recording.malformed`, naming what is wrong and where. */
  constructor(path: string) {
    this.#path = path;
    try {
      this.#fd = openSync(path, 'r');
    } catch (error) {
      throw new ForebayError('file.unreadable', `${path}: ${(error as Error).message}`, { cause: error });
    }
    try {
      const found = this.#readHeader(fstatSync(this.#fd).size);
      this.format = found.format;
      this.#dataAt = found.dataAt;
    } catch (error) {
      closeSync(this.#fd);
      throw error;
    }
  }

  close(): void {
    closeSync(this.#fd);
  }

  /** Counts of `frames` samples from `first` on, an array a channel. */
  read(first: number, frames: number): Int32Array[] {
    const { channels, bitsPerSample } = this.format;
    if (first < 0 || frames < 0 || first + frames > this.format.frames) {
      throw new RangeError(
        `samples ${first} to ${first + frames} are not within the ${this.format.frames} there are`,
      );
    }
    const width = bitsPerSample / 8;
    const bytes = this.#bytes(this.#dataAt + first * channels * width, frames * channels * width);
    return Array.from({ length: channels }, (_, channel) => {
      const counts = new Int32Array(frames);
      for (let frame = 0; frame < frames; frame++) {
        counts[frame] = bytes.readIntLE((frame * channels + channel) * width, width);
      }
      return counts;
    });
  }

  #fail(what: string): never {
    throw new ForebayError('recording.malformed', `${this.#path}: ${what}`);
  }

  #bytes(at: number, length: number): Buffer {
    const buffer = Buffer.alloc(length);
    let got = 0;
    while (got < length) {
      const n = readSync(this.#fd, buffer, got, length - got, at + got);
      if (n === 0) this.#fail(`ends at byte ${at + got}, inside what its header promises`);
      got += n;
    }
    return buffer;
  }

  #readHeader(size: number): { format: WavFormat; dataAt: number } {
    if (size < 44) this.#fail(`is ${size} bytes long, too short for a WAV file`);
    const head = this.#bytes(0, 12);
    if (head.toString('latin1', 0, 4) !== 'RIFF' || head.toString('latin1', 8, 12) !== 'WAVE') {
      this.#fail('does not begin as a RIFF/WAVE file');
    }
    let at = 12;
    let shape: Omit<WavFormat, 'frames'> | null = null;
    for (let chunk = 0; chunk < maxChunks && at + 8 <= size; chunk++) {
      const header = this.#bytes(at, 8);
      const id = header.toString('latin1', 0, 4);
      const length = header.readUInt32LE(4);
      if (id === 'fmt ') shape = this.#readShape(at + 8, length);
      if (id === 'data') {
        if (shape === null) this.#fail('has its samples before its format');
        const open = length === 0 || length === 0xffffffff;
        const present = size - at - 8;
        if (!open && length > present) this.#fail(`promises ${length} bytes of samples and has ${present}`);
        const frameBytes = (shape.channels * shape.bitsPerSample) / 8;
        const frames = Math.floor((open ? present : length) / frameBytes);
        if (frames === 0) this.#fail('holds no samples');
        return { format: { ...shape, frames }, dataAt: at + 8 };
      }
      at += 8 + length + (length % 2);
    }
    return this.#fail('has no samples (no data chunk)');
  }

  #readShape(at: number, length: number): Omit<WavFormat, 'frames'> {
    if (length < 16) this.#fail('has a format chunk too short to be one');
    const bytes = this.#bytes(at, Math.min(length, 40));
    const tag = bytes.readUInt16LE(0);
    const coding = tag === 0xfffe && bytes.length >= 26 ? bytes.readUInt16LE(24) : tag;
    const channels = bytes.readUInt16LE(2);
    const rateHz = bytes.readUInt32LE(4);
    const bits = bytes.readUInt16LE(14);
    if (coding !== 1) this.#fail(`is coded as format ${coding}, not as integer PCM`);
    if (bits !== 16 && bits !== 24 && bits !== 32)
      this.#fail(`has ${bits} bits a sample; 16, 24 and 32 can be read`);
    if (channels < 1 || channels > maxChannels) this.#fail(`claims ${channels} channels`);
    if (rateHz < 1) this.#fail('claims a sample rate of 0');
    return { channels, rateHz, bitsPerSample: bits };
  }
}
