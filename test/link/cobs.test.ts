import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { cobsDecode, Deframer, MAX_FRAME_BYTES } from '../../src/link/cobs.ts';
import { Random } from '../../src/simulate/random.ts';
import { plainCobs } from '../support/sender.ts';

const range = (from: number, to: number) => Array.from({ length: to - from + 1 }, (_, i) => from + i);

function decode(encoded: readonly number[]): number[] | null {
  const into = new Uint8Array(encoded.length);
  const length = cobsDecode(Uint8Array.from(encoded), 0, encoded.length, into);
  return length < 0 ? null : [...into.subarray(0, length)];
}

function collector() {
  const frames: number[][] = [];
  const deframer = new Deframer((frame) => frames.push([...frame]));
  return { frames, deframer };
}

const framed = (frame: readonly number[]) => [...plainCobs(frame), 0];
const random = new Random(11);
const randomBytes = (n: number) => Uint8Array.from({ length: n }, () => random.uint32() & 255);

describe('COBS', () => {
  // The examples of Cheshire and Baker's encoding as published with it (also on its encyclopaedia page).
  const published: [string, number[], number[]][] = [
    ['one zero', [0], [1, 1]],
    ['two zeros', [0, 0], [1, 1, 1]],
    ['a zero inside', [0x11, 0x22, 0x00, 0x33], [3, 0x11, 0x22, 2, 0x33]],
    ['zeros at the end', [0x11, 0, 0, 0], [2, 0x11, 1, 1, 1]],
    ['254 bytes without a zero', range(1, 254), [255, ...range(1, 254)]],
    ['a zero and 254 bytes', range(0, 254), [1, 255, ...range(1, 254)]],
    ['255 bytes without a zero', range(1, 255), [255, ...range(1, 254), 2, 255]],
  ];
  it.each(published)('decodes %s as published', (_name, plain, encoded) => {
    expect(decode(encoded)).toEqual(plain);
  });
  it.each(published)('and the test encoder encodes %s as published', (_name, plain, encoded) => {
    expect(plainCobs(plain)).toEqual(encoded);
  });

  it('accepts 254 bytes that are closed by an extra 01', () => {
    expect(decode([255, ...range(1, 254), 1])).toEqual(range(1, 254));
    expect(decode([3, 7, 7, 255, ...range(1, 254), 1])).toEqual([7, 7, 0, ...range(1, 254)]);
  });

  it('refuses a run that is longer than what is left', () => {
    expect(decode([5, 1, 2, 3])).toBeNull();
    expect(decode([2, 1, 9])).toBeNull();
  });

  it('gives back what was encoded, in both variants', () => {
    const byte = fc.oneof(fc.constant(0), fc.nat(255), fc.constant(1));
    fc.assert(
      fc.property(fc.array(byte, { maxLength: 1200 }), fc.boolean(), (plain, closed) => {
        expect(decode(plainCobs(plain, closed))).toEqual(plain);
      }),
      { seed: 254 },
    );
    for (const length of [253, 254, 255, 507, 508, 509, MAX_FRAME_BYTES]) {
      const plain = Array.from({ length }, (_, i) => 1 + (i % 255));
      expect(decode(plainCobs(plain))).toEqual(plain);
      expect(decode(plainCobs(plain, true))).toEqual(plain);
    }
  });
});

describe('the deframer', () => {
  const frames = [[1, 2, 3], [0, 0, 9], range(1, 254), [...range(1, 255), 0, ...range(0, 255)], [7]];
  const stream = Uint8Array.from(frames.flatMap(framed));

  it('takes a byte at a time', () => {
    const { frames: got, deframer } = collector();
    for (const byte of stream) deframer.push(Uint8Array.of(byte));
    expect(got).toEqual(frames);
  });

  it('takes the stream cut in two at every place', () => {
    for (let cut = 0; cut <= stream.length; cut++) {
      const { frames: got, deframer } = collector();
      deframer.push(stream.subarray(0, cut));
      deframer.push(stream.subarray(cut));
      expect(got).toEqual(frames);
    }
  });

  it('ignores empty frames', () => {
    const { frames: got, deframer } = collector();
    deframer.push(Uint8Array.from([0, 0, ...framed([5]), 0, 0, 0, ...framed([6]), 0]));
    expect(got).toEqual([[5], [6]]);
    expect(deframer.errors).toEqual({ oversize: 0, cobs: 0 });
  });

  it('drops and counts a frame that is cut short, and takes the next', () => {
    const { frames: got, deframer } = collector();
    deframer.push(Uint8Array.from([...framed([1, 2, 3, 4]).slice(0, 3), 0, ...framed([5])]));
    expect(got).toEqual([[5]]);
    expect(deframer.errors).toEqual({ oversize: 0, cobs: 1 });
  });

  it('takes a frame of exactly 8192 bytes, in either variant, and drops one more', () => {
    for (const fill of [(i: number) => 1 + (i % 255), (i: number) => i & 1, () => 0, () => 255]) {
      const exact = Array.from({ length: 8192 }, (_, i) => fill(i));
      for (const closed of [false, true]) {
        const { frames: got, deframer } = collector();
        deframer.push(Uint8Array.from([...plainCobs(exact, closed), 0]));
        deframer.push(Uint8Array.from([...plainCobs([...exact, 1], closed), 0, ...framed([5])]));
        expect(got).toEqual([exact, [5]]);
        expect(deframer.errors).toEqual({ oversize: 1, cobs: 0 });
      }
    }
  });

  it('drops endless bytes without a delimiter as one, keeping nothing, however they are cut', () => {
    for (const piece of [1, 100, 8225, 8226, 8227, 50_000]) {
      const { frames: got, deframer } = collector();
      for (let sent = 0; sent < 50_000; sent += piece) deframer.push(new Uint8Array(piece).fill(7));
      deframer.push(Uint8Array.from([0, ...framed([5])]));
      expect(got).toEqual([[5]]);
      expect(deframer.errors.oversize).toBe(1);
    }
  });

  it('forgets a half frame when told that the connection is a new one', () => {
    const { frames: got, deframer } = collector();
    deframer.push(Uint8Array.from([9, 1, 2]));
    deframer.reset();
    deframer.push(Uint8Array.from(framed([5])));
    expect(got).toEqual([[5]]);
    expect(deframer.errors).toEqual({ oversize: 0, cobs: 0 });
  });

  it('gives the same frames and counts for random bytes however they are cut', () => {
    const noise = randomBytes(20_000);
    const whole = collector();
    whole.deframer.push(noise);
    fc.assert(
      fc.property(fc.array(fc.integer({ min: 1, max: 900 }), { minLength: 1, maxLength: 40 }), (sizes) => {
        const { frames: got, deframer } = collector();
        for (let at = 0, k = 0; at < noise.length; k++) {
          const size = sizes[k % sizes.length]!;
          deframer.push(noise.subarray(at, at + size));
          at += size;
        }
        expect(got).toEqual(whole.frames);
        expect(deframer.errors).toEqual(whole.deframer.errors);
      }),
      { seed: 5, numRuns: 20 },
    );
  });

  it('copies each byte once or twice, however small the pieces: work is linear', () => {
    // Counted, not timed: bytes that set() moves while one large frame arrives a byte at a time.
    const frame = framed(Array.from({ length: 8000 }, (_, i) => 1 + (i % 255)));
    let moved = 0;
    const original = Uint8Array.prototype.set;
    Uint8Array.prototype.set = function (this: Uint8Array, source: ArrayLike<number>, at?: number) {
      moved += source.length;
      original.call(this, source, at);
    };
    try {
      const { deframer } = collector();
      for (const byte of frame) deframer.push(Uint8Array.of(byte));
    } finally {
      Uint8Array.prototype.set = original;
    }
    expect(moved).toBeGreaterThan(8000);
    expect(moved).toBeLessThan(3 * frame.length);
  });
});
