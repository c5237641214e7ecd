/**
 * Reads a FLAC file (RFC 9639) in stretches, as integer counts, with its Vorbis comments.
 *
 * Decoding is our own because the decoder of libflacjs guesses at 16-bit samples: it takes repeated bytes 0 and 255
 * for padding, and so loses counts. The compressed file is held in memory; where frames begin is noted as they are
 * passed, so a stretch read again is found at once.
 */

import { readFileSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { EndOfBits } from './flac-bits.ts';
import { BadFrame, decodeFrame, type FlacFrame } from './flac-frame.ts';
import { type Comments, type FlacFormat, readFlacHead } from './flac-head.ts';

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
    const head = readFlacHead(this.#bytes, (what) => this.#fail(what));
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
}
