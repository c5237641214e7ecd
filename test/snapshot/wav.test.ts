import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import fc from 'fast-check';
import { afterAll, describe, expect, it } from 'vitest';
import { ForebayError } from '../../src/config/errors.ts';
import { WavFile } from '../../src/snapshot/wav.ts';
import { wavBytes } from '../support/wav.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-wav-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

function open(bytes: Buffer): WavFile {
  const path = join(folder, 'x.wav');
  writeFileSync(path, bytes);
  return new WavFile(path);
}

function refusal(bytes: Buffer): string {
  try {
    open(bytes).close();
  } catch (error) {
    if (error instanceof ForebayError) return error.message;
    throw error;
  }
  return 'accepted';
}

const two = [Int32Array.of(1, -2, 300), Int32Array.of(-32768, 32767, 0)];

describe('WavFile', () => {
  it.each([16, 24, 32] as const)('returns the counts of each channel at %i bits', (bits) => {
    const file = open(wavBytes(two, 12_000, bits));
    expect(file.format).toEqual({ channels: 2, rateHz: 12_000, bitsPerSample: bits, frames: 3 });
    expect(file.read(0, 3)).toEqual(two);
    expect(file.read(1, 1)).toEqual([Int32Array.of(-2), Int32Array.of(32767)]);
    expect(() => file.read(2, 2)).toThrow(RangeError);
    file.close();
  });

  it('skips chunks it does not know, odd sizes padded', () => {
    const plain = wavBytes(two, 12_000, 16);
    const extra = Buffer.concat([Buffer.from('LIST'), Buffer.from([3, 0, 0, 0]), Buffer.from('abc\0')]);
    const file = open(Buffer.concat([plain.subarray(0, 12), extra, plain.subarray(12)]));
    expect(file.read(0, 3)).toEqual(two);
    file.close();
  });

  it.each([0, 0xffffffff])('reads to the end when the data size was never filled in (%i)', (size) => {
    const bytes = wavBytes(two, 12_000, 16);
    bytes.writeUInt32LE(size, 40);
    const file = open(bytes);
    expect(file.format.frames).toBe(3);
    file.close();
  });

  it('refuses what it cannot read, naming why', () => {
    const good = wavBytes(two, 12_000, 16);
    const changed = (at: number, value: number) => {
      const bytes = Buffer.from(good);
      bytes.writeUInt16LE(value, at);
      return refusal(bytes);
    };
    expect(changed(20, 3)).toMatch(/format 3, not as integer PCM/);
    expect(changed(34, 8)).toMatch(/8 bits/);
    expect(changed(22, 0)).toMatch(/0 channels/);
    expect(refusal(good.subarray(0, 50))).toMatch(/promises 12 bytes of samples and has 6/);
    expect(refusal(good.subarray(0, 20))).toMatch(/too short/);
    expect(refusal(Buffer.concat([Buffer.from('OggS'), good.subarray(4)]))).toMatch(/does not begin/);
    expect(() => new WavFile(join(folder, 'absent.wav'))).toThrow(/absent\.wav/);
  });

  it('answers any bytes with samples or a refusal', () => {
    const good = wavBytes(two, 12_000, 16);
    const mutation = fc.record({ at: fc.nat(good.length - 1), value: fc.nat(255) });
    fc.assert(
      fc.property(fc.array(mutation, { maxLength: 6 }), fc.nat(good.length), (mutations, length) => {
        const bytes = Buffer.from(good);
        for (const { at, value } of mutations) bytes[at] = value;
        const path = join(folder, 'fuzz.wav');
        writeFileSync(path, bytes.subarray(0, length));
        try {
          const file = new WavFile(path);
          expect(file.read(0, file.format.frames)).toHaveLength(file.format.channels);
          file.close();
        } catch (error) {
          expect(error).toBeInstanceOf(ForebayError);
        }
      }),
      { seed: 20261201, numRuns: 2000 },
    );
  });
});
