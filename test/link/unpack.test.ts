import { describe, expect, it } from 'vitest';
import { countAtLimits } from '../../src/link/over-range.ts';
import { bytesPerCount, countRangeOf, unpackCounts } from '../../src/link/unpack.ts';

function unpack(
  format: 'i16' | 'i24',
  values: readonly number[],
  channels: number,
  oddPlace = false,
): number[] {
  const size = bytesPerCount(format);
  const payload = new Uint8Array(values.length * size + 1).subarray(oddPlace ? 1 : 0);
  values.forEach((value, i) => {
    for (let b = 0; b < size; b++) payload[i * size + b] = (value >> (8 * b)) & 255;
  });
  const n = values.length / channels;
  const into = new Int32Array(channels * 10);
  unpackCounts(payload.subarray(0, values.length * size), format, channels, n, into, 10);
  return Array.from({ length: channels }, (_, c) => [...into.subarray(c * 10, c * 10 + n)]).flat();
}

describe('unpacking counts', () => {
  it('keeps sign and order, of 16 and 24 bits, at even and odd places', () => {
    const short = [1, -1, 32767, -32768, 256, -256];
    for (const odd of [false, true]) {
      expect(unpack('i16', short, 2, odd)).toEqual([1, 32767, 256, -1, -32768, -256]);
      expect(unpack('i24', short, 2, odd)).toEqual([1, 32767, 256, -1, -32768, -256]);
      expect(unpack('i24', [8388607, -8388608, 65536, -65537, 1, -1], 3, odd)).toEqual([
        8388607, -65537, -8388608, 1, 65536, -1,
      ]);
    }
  });

  it('knows where a converter is at its limit', () => {
    const [low, high] = countRangeOf('i16');
    const values = Int32Array.of(-32768, -32767, 0, 32766, 32767, 32767, -32768);
    expect(countAtLimits(values, 0, 7, low, high)).toBe(4);
    expect(countAtLimits(values, 1, 4, low, high)).toBe(0);
    expect(countRangeOf('i24')).toEqual([-8388608, 8388607]);
  });
});
