/** FLAC against readers and writers that are not ours: `flac`, `metaflac` and libsndfile, where they are installed. */
import { execFileSync, spawnSync } from 'node:child_process';
import { createHash } from 'node:crypto';
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { crc8, crc16 } from '../../src/snapshot/flac-bits.ts';
import { bitsFor, encodeFlac, headerRateHz } from '../../src/snapshot/flac-encode.ts';
import { FlacFile } from '../../src/snapshot/flac-file.ts';
import { uniform } from '../support/pump-signal.ts';
import { hasPython, hasTool } from '../support/tools.ts';
import { wavBytes } from '../support/wav.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-flac-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

/** Everything that a codec may stumble over: both ends of the range, runs of 0 and −1, noise, a tone, silence. */
function hardCounts(channels: number, frames: number, bits: number, seed = 7): Int32Array[] {
  const random = uniform(seed);
  const full = 2 ** (bits - 1);
  return Array.from({ length: channels }, (_, c) =>
    Int32Array.from({ length: frames }, (_, i) => {
      const stretch = Math.floor(i / 500) % 6;
      if (stretch === 0) return Math.floor((2 * random() - 1) * full);
      if (stretch === 1) return i % 2 === 0 ? full - 1 : -full;
      if (stretch === 2) return 0;
      if (stretch === 3) return -(i % 3 === 0 ? 1 : 0) + (i % 5 === 0 ? 256 : 0);
      if (stretch === 4) return Math.round(0.8 * full * Math.sin((c + 1) * 0.05 * i));
      return c === 0 ? -1 : Math.floor(random() * 40) - 20;
    }),
  );
}

const plain = (counts: readonly Int32Array[]) => counts.map((channel) => Array.from(channel));

async function written(name: string, counts: Int32Array[], bitsPerSample: 16 | 24, rateHz = 40_960) {
  const path = join(folder, name);
  const comments = ['SITE=north-weir', 'CAUSE=Über 6.6 mm/s, µ'];
  writeFileSync(path, await encodeFlac({ counts, bitsPerSample, rateHz, comments }));
  return path;
}

describe('FLAC', () => {
  it.each([
    [1, 16],
    [2, 16],
    [3, 16],
    [8, 16],
    [1, 24],
    [2, 24],
    [3, 24],
  ] as const)('keeps each count of %i channels in %i bit', async (channels, bits) => {
    const counts = hardCounts(channels, 10_007, bits);
    const file = new FlacFile(await written(`own-${channels}-${bits}.flac`, counts, bits));
    expect(file.format).toEqual({ channels, bitsPerSample: bits, rateHz: 40_960, frames: 10_007 });
    expect(file.comments.get('CAUSE')).toBe('Über 6.6 mm/s, µ');
    expect(plain(file.read(0, 10_007))).toEqual(plain(counts));
  });

  it('keeps counts whose lowest bits are never used', async () => {
    const counts = hardCounts(2, 9000, 12).map((channel) => channel.map((count) => 16 * count));
    const file = new FlacFile(await written('wasted.flac', counts, 16));
    expect(plain(file.read(0, 9000))).toEqual(plain(counts));
  });

  it('reads any stretch, in any order', async () => {
    const counts = hardCounts(2, 20_000, 16);
    const file = new FlacFile(await written('stretches.flac', counts, 16));
    const random = uniform(3);
    for (let round = 0; round < 40; round++) {
      const first = Math.floor(random() * 20_000);
      const frames = Math.floor(random() * (20_001 - first));
      expect(plain(file.read(first, frames))).toEqual(
        plain(counts.map((channel) => channel.slice(first, first + frames))),
      );
    }
    expect(() => file.read(19_999, 2)).toThrow(RangeError);
  });

  it('says which bits and which rate a header can hold', () => {
    expect(bitsFor([Int32Array.of(32_767, -32_768)])).toBe(16);
    expect(bitsFor([Int32Array.of(0), Int32Array.of(32_768)])).toBe(24);
    expect(bitsFor([Int32Array.of(-8_388_609)])).toBeNull();
    // RFC 9639, 9.1.2, allows any whole rate to 1 048 575 Hz; libFLAC 1.3 less.
    expect([25_600.4, 70_003, 2e6, 0.2].map(headerRateHz)).toEqual([25_600, 70_000, 655_350, 1]);
  });

  it('is refused with its place where it is damaged or cut', async () => {
    const bytes = readFileSync(await written('whole.flac', hardCounts(2, 9000, 16), 16));
    const open = (changed: Buffer) => {
      const path = join(folder, 'damaged.flac');
      writeFileSync(path, changed);
      return () => new FlacFile(path).read(0, 9000);
    };
    expect(open(bytes.subarray(0, bytes.length - 10))).toThrow(/damaged: the stream ends inside/);
    expect(open(bytes.subarray(0, 30))).toThrow(/within its metadata/);
    expect(open(Buffer.from(`fLaX${'x'.repeat(60)}`))).toThrow(/does not begin/);
    const flipped = Buffer.from(bytes);
    flipped[bytes.length - 500]! ^= 4;
    expect(open(flipped)).toThrow(/recording|damaged/);
  });

  it('has the checksums of its standard', () => {
    // "123456789": CRC-8/SMBUS and CRC-16/UMTS of the catalogue of parametrised CRC algorithms (from memory).
    expect(crc8(Buffer.from('123456789'))).toBe(0xf4);
    expect(crc16(Buffer.from('123456789'))).toBe(0xfee8);
  });
});

describe.runIf(hasTool('flac'))('FLAC and the flac command', () => {
  it.each([
    [1, 16],
    [3, 16],
    [2, 24],
    [3, 24],
  ] as const)(
    'ours of %i channels in %i bit passes its test and decodes to the counts',
    async (channels, bits) => {
      const counts = hardCounts(channels, 12_345, bits);
      const path = await written(`theirs-${channels}-${bits}.flac`, counts, bits);
      execFileSync('flac', ['--silent', '--test', path]);
      const order = ['--force-raw-format', '--endian=little', '--sign=signed'];
      const raw = execFileSync('flac', ['--silent', '--decode', '--stdout', ...order, path], {
        maxBuffer: 1e8,
      });
      // RFC 9639, 8.2: the MD5 of the samples, interleaved, little-endian, signed.
      const md5 = execFileSync('metaflac', ['--show-md5sum', path], { encoding: 'utf8' }).trim();
      expect(md5).toBe(createHash('md5').update(raw).digest('hex'));
      const width = bits / 8;
      const decoded = counts.map((channel, c) =>
        channel.map((_, i) => raw.readIntLE((i * channels + c) * width, width)),
      );
      expect(plain(decoded)).toEqual(plain(counts));
    },
  );

  it.each([
    ['-0', 16, 2],
    ['-8', 16, 2],
    ['-5', 16, 3],
    ['-8', 24, 2],
    ['-5', 24, 1],
  ] as const)(
    'what `flac %s` writes in %i bit, %i channels, is read to the count',
    (level, bits, channels) => {
      const counts = hardCounts(channels, 9999, bits, 11);
      const raw = join(folder, 'their.raw');
      const path = join(folder, 'their.flac');
      // The samples of a WAV file without its head of 44 bytes.
      writeFileSync(raw, wavBytes(counts, 25_600, bits).subarray(44));
      const shape = [
        `--channels=${channels}`,
        `--bps=${bits}`,
        '--sample-rate=25600',
        '--sign=signed',
        '--endian=little',
      ];
      execFileSync('flac', ['--silent', '--force', level, '--force-raw-format', ...shape, '-o', path, raw]);
      expect(plain(new FlacFile(path).read(0, 9999))).toEqual(plain(counts));
    },
  );

  it('carries comments that metaflac lists', async () => {
    const path = await written('tags.flac', hardCounts(1, 500, 16), 16);
    const list = execFileSync('metaflac', ['--list', '--block-type=VORBIS_COMMENT', path], {
      encoding: 'utf8',
    });
    expect(list).toContain('SITE=north-weir');
    expect(
      spawnSync('metaflac', ['--show-tag=CAUSE', '--no-utf8-convert', path], { encoding: 'utf8' }).stdout,
    ).toBe('CAUSE=Über 6.6 mm/s, µ\n');
  });
});

describe.runIf(hasPython('soundfile'))('FLAC and libsndfile', () => {
  it.each([16, 24] as const)('ours in %i bit decodes to the counts', async (bits) => {
    const counts = hardCounts(3, 8000, bits, 5);
    const path = await written(`snd-${bits}.flac`, counts, bits);
    const program =
      'import sys, soundfile\n' +
      'data, rate = soundfile.read(sys.argv[1], dtype="int32", always_2d=True)\n' +
      'sys.stdout.buffer.write(data.astype("<i4").tobytes())\n' +
      'sys.stderr.write(str(rate))\n';
    const { stdout, stderr } = spawnSync('/usr/bin/python3', ['-c', program, path], { maxBuffer: 1e8 });
    expect(stderr.toString()).toBe('40960');
    // libsndfile scales integers to the full 32 bits.
    const decoded = counts.map((channel, c) =>
      channel.map((_, i) => stdout.readInt32LE(4 * (i * 3 + c)) >> (32 - bits)),
    );
    expect(plain(decoded)).toEqual(plain(counts));
  });
});
