import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { Deframer } from '../../src/link/cobs.ts';
import { decodeFrame, type Frame } from '../../src/link/frames.ts';
import { Random } from '../../src/simulate/random.ts';
import { NodeFrames, type SentNode } from '../support/sender.ts';

/** The test vectors of the page that describes the link (src/link/README.md), delimiter included. */
const VECTORS = {
  describe: '04010107010101010101067102020101010680390168030113803f047461636802413103302e393ab48d3f00',
  samples: '0401020702010101010101010101010102030101020103ffff0101030101055330a6b900',
  health: '040103070202010106660874130301010101010105def892ef00',
};

const spec: SentNode = {
  node: 7,
  rateHz: 40960,
  format: 'i16',
  channels: [
    { name: 'h', unit: 'g', scale: 2 ** -12 },
    { name: 'tach', unit: 'logic', scale: 1 },
  ],
  serialNumber: 'A1',
  firmware: '0.9',
};

/** Decoded frames with a copy of the payload, which holds only until the next. */
function decodeAll(...pieces: Uint8Array[]): { frames: Frame[]; payloads: number[][]; deframer: Deframer } {
  const frames: Frame[] = [];
  const payloads: number[][] = [];
  const deframer = new Deframer((bytes) => {
    const frame = decodeFrame(bytes);
    frames.push(frame);
    if (frame.kind === 'samples') payloads.push([...frame.payload]);
  });
  for (const piece of pieces) deframer.push(piece);
  return { frames, payloads, deframer };
}

const one = (bytes: Uint8Array) => decodeAll(bytes).frames[0];
const good = (frames: Frame[]) => frames.filter((frame) => frame.kind !== 'error');
const hex = (text: string) => Uint8Array.from(Buffer.from(text, 'hex'));

describe('frames of the sensor link', () => {
  it('are those of the published vectors', () => {
    const { frames, payloads } = decodeAll(hex(VECTORS.describe + VECTORS.samples + VECTORS.health));
    expect(frames).toMatchObject([
      {
        kind: 'describe',
        node: 7,
        counter: 0,
        rateHz: 40960,
        format: 'i16',
        channels: [
          { name: 'h', unit: 'g', unitsPerCount: 2 ** -12 },
          { name: 'tach', unit: 'logic', unitsPerCount: 1 },
        ],
        serialNumber: 'A1',
        firmware: '0.9',
      },
      { kind: 'samples', node: 7, counter: 1, firstIndex: 0, n: 3 },
      {
        kind: 'health',
        node: 7,
        counter: 2,
        temperatureC: 21.5,
        supplyV: 4.98,
        overRangeSamples: 3,
        lostSamples: 0,
      },
    ]);
    expect(payloads).toEqual([[0, 0, 1, 0, 0xff, 0xff, 0, 0, 0, 1, 1, 0]]);
  });

  it('are made alike by the independent sender of the tests', () => {
    const sender = new NodeFrames(spec);
    const made = [
      sender.describe(),
      sender.samples(0, [0, 1, -1, 0, 256, 1]),
      sender.health(21.5, 4.98, 3, 0),
    ];
    expect(made.map((frame) => Buffer.from(frame).toString('hex'))).toEqual(Object.values(VECTORS));
  });

  it('carry indices to 2^53 and say so beyond', () => {
    const sender = new NodeFrames(spec);
    expect(one(sender.samples(2n ** 53n - 3n, [1, 1]))).toMatchObject({ firstIndex: 2 ** 53 - 3 });
    expect(one(sender.samples(2n ** 53n - 1n, [1, 1]))).toMatchObject({ firstIndex: null });
    expect(one(sender.samples(2n ** 64n - 1n, [1, 1]))).toMatchObject({ firstIndex: null });
  });

  it('have negative temperatures, and counters that wrap', () => {
    const sender = new NodeFrames(spec, 0xffffffff);
    expect(one(sender.health(-12.34, 3.3, 0, 4e9))).toMatchObject({
      temperatureC: -12.34,
      counter: 0xffffffff,
      lostSamples: 4e9,
    });
  });

  it('are refused by cause', () => {
    const sender = new NodeFrames(spec);
    const cause = (bytes: Uint8Array) => {
      const frame = one(bytes);
      return frame?.kind === 'error' ? frame.cause : frame?.kind;
    };
    expect(cause(sender.frame(2, [], 2))).toBe('version');
    expect(cause(sender.frame(9, [1, 2, 3]))).toBe('unknown-kind');
    expect(cause(sender.frame(3, [1, 2, 3]))).toBe('length');
    expect(cause(sender.frame(2, [0, 0, 0, 0, 0, 0, 0, 0, 0, 0]))).toBe('length');
    expect(cause(sender.frame(2, [0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 5, 5]))).toBe('length');
    expect(cause(sender.frame(1, [1, 2]))).toBe('length');
    expect(cause(Uint8Array.of(4, 1, 1, 7, 0))).toBe('short');
    const corrupt = sender.samples(0, [1, 2]);
    corrupt[corrupt.length - 2]! ^= 0x40;
    expect(cause(corrupt)).toBe('crc');
  });

  it('describe nothing impossible', () => {
    const cause = (change: Partial<SentNode>) => one(new NodeFrames({ ...spec, ...change }).describe());
    const channel = { name: 'h', unit: 'g' as const, scale: 1 };
    const refused = { kind: 'error', cause: 'describe' };
    expect(cause({ rateHz: 0 })).toEqual(refused);
    expect(cause({ channels: [] })).toEqual(refused);
    expect(cause({ channels: Array.from({ length: 9 }, (_, i) => ({ ...channel, name: `c${i}` })) })).toEqual(
      refused,
    );
    expect(cause({ channels: [channel, channel] })).toEqual(refused);
    expect(cause({ channels: [{ ...channel, name: '' }] })).toEqual(refused);
    for (const scale of [0, Number.NaN, Number.POSITIVE_INFINITY]) {
      expect(cause({ channels: [{ ...channel, scale }] })).toEqual(refused);
    }
    expect(
      cause({ channels: Array.from({ length: 8 }, (_, i) => ({ ...channel, name: `c${i}` })) }),
    ).toMatchObject({
      kind: 'describe',
    });
  });

  it('are found again after and before garbage', () => {
    const sender = new NodeFrames(spec);
    const frame = sender.describe();
    const { frames } = decodeAll(
      Uint8Array.of(1, 2, 3, 0),
      frame,
      Uint8Array.of(9, 9, 9, 9, 0),
      frame,
      frame.subarray(0, 20),
      Uint8Array.of(0),
      frame,
    );
    expect(good(frames)).toHaveLength(3);
  });

  it('lose no more to a megabyte of noise than the one after it', () => {
    const random = new Random(1);
    const sender = new NodeFrames(spec);
    const before = [sender.samples(0, [1, 2]), sender.samples(1, [3, 4])];
    const after = [2, 3, 4, 5].map((index) => sender.samples(index, [index, index]));
    const noise = Uint8Array.from({ length: 1 << 20 }, () => random.uint32() & 255);
    const { frames } = decodeAll(...before, noise, ...after);
    const indices = good(frames).map((frame) => (frame.kind === 'samples' ? frame.firstIndex : null));
    expect(indices.slice(0, 2)).toEqual([0, 1]);
    expect(indices.slice(-3)).toEqual([3, 4, 5]);
    expect(indices.length).toBeLessThanOrEqual(6);
  });

  it('are never made up: any flipped bit is found', () => {
    const sender = new NodeFrames(spec);
    const stream = sender.describe();
    fc.assert(
      fc.property(fc.nat(stream.length - 2), fc.nat(7), (at, bit) => {
        const broken = stream.slice();
        broken[at]! ^= 1 << bit;
        expect(good(decodeAll(broken, Uint8Array.of(0)).frames)).toEqual([]);
      }),
      { seed: 3, numRuns: 400 },
    );
  });

  it('of any bytes at all are taken or refused, never thrown', () => {
    const sender = new NodeFrames(spec);
    fc.assert(
      fc.property(fc.nat(4), fc.array(fc.nat(255), { maxLength: 60 }), (kind, body) => {
        // With a good checksum, so that the bodies are looked at.
        expect(decodeAll(sender.frame(kind, body)).frames).toHaveLength(1);
      }),
      { seed: 8, numRuns: 2000 },
    );
  });
});
