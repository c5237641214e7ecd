/** A recording of any format that can be replayed: channels of integer counts at one rate. */

import { WavFile } from './wav.ts';

export interface Recording {
  readonly channels: number;
  readonly rateHz: number;
  /** Samples per channel. */
  readonly frames: number;
  /** Counts from −2^(bits−1) to 2^(bits−1) − 1. */
  readonly bitsPerSample: number;
  read(first: number, frames: number): Int32Array[];
  close(): void;
}

/** @throws ForebayError where the file cannot be read as a recording. */
export function openRecording(path: string): Recording {
  const file = new WavFile(path);
  return {
    ...file.format,
    read: (first, frames) => file.read(first, frames),
    close: () => file.close(),
  };
}
