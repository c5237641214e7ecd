/** Recordings from elsewhere: samples or a refusal, and no more memory than the file is worth. */
import { existsSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import fc from 'fast-check';
import { afterAll, describe, expect, it } from 'vitest';
import { ForebayError } from '../../src/config/errors.ts';
import { EndOfBits } from '../../src/snapshot/flac-bits.ts';
import { encodeFlac } from '../../src/snapshot/flac-encode.ts';
import { FlacFile } from '../../src/snapshot/flac-file.ts';
import { BadFrame, decodeFrame } from '../../src/snapshot/flac-frame.ts';
import { WavFile } from '../../src/snapshot/wav.ts';
import { wavBytes } from '../support/wav.ts';
import { damaged, runs, seed, timeout } from './mutate.ts';

const folder = mkdtempSync(join(existsSync('/dev/shm') ? '/dev/shm' : tmpdir(), 'forebay-fuzz-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

const counts = [0, 1].map((c) =>
  Int32Array.from({ length: 300 }, (_, i) => Math.round(900 * Math.sin(i / (5 + c)))),
);

/** What a reader gives of the file: how many samples of how many channels, or null where it refuses. */
function read(open: (path: string) => WavFile | FlacFile, bytes: Uint8Array): number | null {
  const path = join(folder, 'file');
  writeFileSync(path, bytes);
  let file: WavFile | FlacFile | null = null;
  try {
    file = open(path);
    const { frames, channels } = file.format;
    // Whoever reads does so in stretches.
    const length = Math.min(frames, 1000);
    const got = file.read(frames - length, length);
    expect(got.map((channel) => channel.length)).toEqual(Array(channels).fill(length));
    return length;
  } catch (error) {
    if (!(error instanceof ForebayError)) throw error;
    return null;
  } finally {
    if (file instanceof WavFile) file.close();
  }
}

describe('a recording', () => {
  it('as WAV', { timeout }, () => {
    const good = [wavBytes(counts, 12_000, 16), wavBytes(counts, 12_000, 24)];
    let whole = 0;
    fc.assert(
      fc.property(damaged(good), (bytes) => {
        if (read((path) => new WavFile(path), bytes) !== null) whole++;
      }),
      { seed, numRuns: runs(0.08) },
    );
    expect(whole).toBeGreaterThan(runs(0.08) / 10);
  });

  it('as FLAC', { timeout }, async () => {
    const comments = ['SITE=x', 'CAUSE=y'];
    const good = [
      await encodeFlac({ counts, bitsPerSample: 16, rateHz: 12_000, comments }),
      await encodeFlac({ counts: [counts[0]!], bitsPerSample: 24, rateHz: 40_960, comments }),
    ];
    let whole = 0;
    let refused = 0;
    fc.assert(
      fc.property(damaged(good), (bytes) => {
        if (read((path) => new FlacFile(path), bytes) !== null) whole++;
        else refused++;
      }),
      { seed, numRuns: runs(0.06) },
    );
    expect(whole).toBeGreaterThan(0);
    expect(refused).toBeGreaterThan(0);
  });

  it('as a FLAC frame whose checksum is made to hold or not: counts, or a refusal by its name', {
    timeout,
  }, async () => {
    const file = await encodeFlac({ counts, bitsPerSample: 16, rateHz: 12_000, comments: [] });
    // The first frame begins with its sync code (RFC 9639, 9.1) behind the metadata.
    const at = file.indexOf(Buffer.from([0xff, 0xf8]));
    const head = file.subarray(at, at + 7);
    const body = Uint8Array.from(file.subarray(at + 7));
    const shape = { channels: 2, bitsPerSample: 16, rateHz: 12_000, frames: 300 } as const;
    let decoded = 0;
    fc.assert(
      fc.property(damaged([body]), (bytes) => {
        try {
          const { samples } = decodeFrame(Buffer.concat([head, bytes]), 0, shape);
          decoded++;
          expect(samples[0]!.length).toBeLessThanOrEqual(65_536);
        } catch (error) {
          if (!(error instanceof BadFrame || error instanceof EndOfBits)) throw error;
        }
      }),
      { seed, numRuns: runs(0.11) },
    );
    expect(decoded).toBeGreaterThan(0);
  });
});
