/** A recording of any format that can be replayed: channels of integer counts at one rate. */

import { closeSync, openSync, readSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { FlacFile } from './flac-file.ts';
import { type SnapshotTags, tagsOf } from './tags.ts';
import { WavFile } from './wav.ts';

export interface Recording {
  readonly channels: number;
  /** Of a snapshot, the rate that it was measured with. */
  readonly rateHz: number;
  /** Samples per channel. */
  readonly frames: number;
  /** Counts from −2^(bits−1) to 2^(bits−1) − 1. */
  readonly bitsPerSample: number;
  /** What a snapshot says of itself: scales, units, points, rate, time; null: a recording that says nothing. */
  readonly tags: SnapshotTags | null;
  /** Counts of `frames` samples from `first` on, an array a channel. */
  read(first: number, frames: number): Int32Array[];
  close(): void;
}

/** @throws ForebayError where the file cannot be read as a recording. */
export function openRecording(path: string): Recording {
  return beginsAsFlac(path) ? openFlac(path) : openWav(path);
}

function openWav(path: string): Recording {
  const file = new WavFile(path);
  return {
    ...file.format,
    tags: null,
    read: (first, frames) => file.read(first, frames),
    close: () => file.close(),
  };
}

function openFlac(path: string): Recording {
  const file = new FlacFile(path);
  let tags: SnapshotTags | null;
  try {
    tags = tagsOf(file.comments, file.format.channels);
  } catch (error) {
    throw new ForebayError('recording.malformed', `${path}: ${(error as Error).message}`, { cause: error });
  }
  return {
    ...file.format,
    rateHz: tags?.rate.hz ?? file.format.rateHz,
    tags,
    read: (first, frames) => file.read(first, frames),
    close: () => undefined,
  };
}

function beginsAsFlac(path: string): boolean {
  let fd: number;
  try {
    fd = openSync(path, 'r');
  } catch {
    // The reader of WAV files says what is wrong.
    return false;
  }
  try {
    const head = Buffer.alloc(4);
    readSync(fd, head, 0, 4, 0);
    return head.toString('latin1') === 'fLaC';
  } finally {
    closeSync(fd);
  }
}
