/**
 * Reads a FLAC file (RFC 9639) in stretches, as integer counts, with its Vorbis comments.
 *
 * Layout: `fLaC`; metadata blocks of a flag and type byte, a u24 size and that many bytes, STREAMINFO first; frames.
 * Decoding is our own because the decoder of libflacjs guesses at 16-bit samples: it takes repeated bytes 0 and 255
 * for padding, and so loses counts. The compressed file is held in memory; where frames begin is noted as they are
 * passed, so a stretch read again is found at once.
 */

import { readFileSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { EndOfBits } from './flac-bits.ts';
import { BadFrame, decodeFrame, type FlacFrame, type FlacShape } from './flac-frame.ts';

export interface FlacFormat extends FlacShape {
  /** As the header says: whole hertz. */
  rateHz: number;
  /** Samples per channel. */
  frames: number;
}

/** `NAME=value` lines by name in upper case; of a repeated name the first. */
export type Comments = ReadonlyMap<string, string>;

const STREAMINFO = 0;
const VORBIS_COMMENT = 4;

export class FlacFile {
  readonly format: FlacFormat;
  readonly comments: Comments;
  readonly #path: string;
  readonly #bytes: Buffer;
  /** Of each frame passed so far: its first sample and its first byte. */
  readonly #starts: { sample: number; at: number }[];

  /** @throws ForebayError `file.unreadable` or `recording.malformed`, naming what is wrong and where. */
  constructor(path: string) {
    this.#path = path;
    try {
      this.#bytes = readFileSync(path);
    } catch (error) {
      throw new ForebayError('file.unreadable', `${path}: ${(error as Error).message}`, { cause: error });
    }
    const head = this.#readHead();
    this.format = head.format;
    this.comments = head.comments;
    this.#starts = [{ sample: 0, at: head.framesAt }];
    if (this.format.frames === 0) this.format.frames = this.#countFrames();
    if (this.format.frames === 0) this.#fail('holds no samples');
  }

  /** Counts of `frames` samples from `first` on, an array a channel. */
  read(first: number, frames: number): Int32Array[] {
    const { channels } = this.format;
    if (first < 0 || frames < 0 || first + frames > this.format.frames) {
      throw new RangeError(
        `samples ${first} to ${first + frames} are not within the ${this.format.frames} there are`,
      );
    }
    const out = Array.from({ length: channels }, () => new Int32Array(frames));
    let place = this.#startBefore(first);
    while (place.sample < first + frames) {
      if (place.at >= this.#bytes.length)
        this.#fail(`ends after ${place.sample} of ${this.format.frames} samples`);
      const { samples, end } = this.#frameAt(place.at);
      const length = samples[0]!.length;
      const from = Math.max(first, place.sample);
      const to = Math.min(first + frames, place.sample + length);
      for (let channel = 0; channel < channels; channel++) {
        out[channel]!.set(
          samples[channel]!.subarray(Math.max(0, from - place.sample), Math.max(0, to - place.sample)),
          Math.min(from - first, frames),
        );
      }
      place = this.#noteStart({ sample: place.sample + length, at: end });
    }
    return out;
  }

  #startBefore(sample: number): { sample: number; at: number } {
    let [low, high] = [0, this.#starts.length - 1];
    while (low < high) {
      const middle = Math.ceil((low + high) / 2);
      if (this.#starts[middle]!.sample <= sample) low = middle;
      else high = middle - 1;
    }
    return this.#starts[low]!;
  }

  #noteStart(start: { sample: number; at: number }): { sample: number; at: number } {
    if (start.sample > this.#starts.at(-1)!.sample) this.#starts.push(start);
    return start;
  }

  /** A stream whose length was not known when it was begun. */
  #countFrames(): number {
    let place = this.#starts[0]!;
    while (place.at < this.#bytes.length) {
      const { samples, end } = this.#frameAt(place.at);
      place = this.#noteStart({ sample: place.sample + samples[0]!.length, at: end });
    }
    return place.sample;
  }

  #frameAt(at: number): FlacFrame {
    try {
      return decodeFrame(this.#bytes, at, this.format);
    } catch (error) {
      if (error instanceof BadFrame || error instanceof EndOfBits)
        return this.#fail(`the frame at byte ${at} is damaged: ${error.message}`);
      throw error;
    }
  }

  #fail(what: string): never {
    throw new ForebayError('recording.malformed', `${this.#path}: ${what}`);
  }

  #readHead(): { format: FlacFormat; comments: Comments; framesAt: number } {
    const bytes = this.#bytes;
    if (bytes.toString('latin1', 0, 4) !== 'fLaC') this.#fail('does not begin as a FLAC file');
    let format: FlacFormat | null = null;
    let comments: Comments = new Map();
    let at = 4;
    for (let last = false; !last; ) {
      if (at + 4 > bytes.length) this.#fail('ends within its metadata');
      last = (bytes[at]! & 0x80) !== 0;
      const type = bytes[at]! & 0x7f;
      const length = bytes.readUIntBE(at + 1, 3);
      const body = bytes.subarray(at + 4, at + 4 + length);
      if (body.length < length) this.#fail('ends within its metadata');
      if (type === STREAMINFO) format = this.#readStreamInfo(body);
      if (type === VORBIS_COMMENT) comments = this.#readComments(body);
      at += 4 + length;
    }
    if (format === null) return this.#fail('has no STREAMINFO block');
    return { format, comments, framesAt: at };
  }

  /** Sizes (10 bytes), rate in 20 bits, channels − 1 in 3, bits − 1 in 5, samples in 36, MD5 (16 bytes). */
  #readStreamInfo(body: Buffer): FlacFormat {
    if (body.length !== 34) this.#fail(`has a STREAMINFO block of ${body.length} bytes instead of 34`);
    const packed = body.readBigUInt64BE(10);
    return {
      rateHz: Number(packed >> 44n),
      channels: Number((packed >> 41n) & 7n) + 1,
      bitsPerSample: Number((packed >> 36n) & 31n) + 1,
      frames: Number(packed & 0xfffffffffn),
    };
  }

  /** u32 size and vendor, u32 number of comments, each with a u32 size; little-endian, unlike the rest of the file. */
  #readComments(body: Buffer): Comments {
    const comments = new Map<string, string>();
    let at = 0;
    const number = () => {
      if (at + 4 > body.length) this.#fail('has comments that are cut short');
      at += 4;
      return body.readUInt32LE(at - 4);
    };
    const text = () => {
      const length = number();
      if (at + length > body.length) this.#fail('has comments that are cut short');
      at += length;
      return body.toString('utf8', at - length, at);
    };
    text();
    for (let left = number(); left > 0; left--) {
      const line = text();
      const equals = line.indexOf('=');
      const name = line.slice(0, Math.max(0, equals)).toUpperCase();
      if (name !== '' && !comments.has(name)) comments.set(name, line.slice(equals + 1));
    }
    return comments;
  }
}
