/** Whatever comes over the wire: no throw, no sample out of nothing, and no difference made by how it is cut. */
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { Deframer } from '../../src/link/cobs.ts';
import { ColumnStream } from '../../src/link/column-stream.ts';
import { decodeFrame } from '../../src/link/frames.ts';
import { NodeStream } from '../../src/link/node-stream.ts';
import { NodeFrames } from '../support/sender.ts';
import { damaged, pieces, runs, seed, timeout } from './mutate.ts';

const spec = {
  node: 7,
  rateHz: 12_000,
  format: 'i16' as const,
  channels: [
    { name: 'h', unit: 'g' as const, scale: 0.001 },
    { name: 'tach', unit: 'logic' as const, scale: 1 },
  ],
  serialNumber: 'A1',
  firmware: '1',
};

function stream(format: 'i16' | 'i24', restart: boolean): Uint8Array {
  const frames = new NodeFrames({ ...spec, format });
  const parts = [frames.describe()];
  for (let k = 0; k < 4; k++) {
    if (restart && k === 2) {
      frames.counter = 0;
      parts.push(frames.describe());
    }
    const index = restart && k >= 2 ? (k - 2) * 5 : k * 5;
    parts.push(frames.samples(index, [1, 0, -2, 1, 300, 0, -32768, 1, 32767, 0]));
  }
  parts.push(frames.health(20, 5, 1, 2));
  return Uint8Array.from(parts.flatMap((part) => [...part]));
}

/** Everything that a receiver would notice, in order. */
function received(bytes: Uint8Array, sizes: readonly number[]): string {
  const events: string[] = [];
  let samples = 0;
  const node = new NodeStream(
    { node: 7, serialNumber: 'A1', sampleRateHz: null, channels: null },
    {
      onEpoch: (description, first, because) =>
        events.push(`epoch ${first} ${because} ${JSON.stringify(description)}`),
      onGap: (n) => {
        if (!Number.isSafeInteger(n) || n <= 0) throw new RangeError(`a gap of ${n}`);
        events.push(`gap ${n}`);
      },
      onSamples: (planar, stride, n) => {
        samples += n;
        for (let i = 0; i < n; i++) events.push(`${planar[i]} ${planar[stride + i]}`);
      },
    },
  );
  const deframer = new Deframer((frame) => {
    const decoded = decodeFrame(frame);
    if (decoded.kind === 'error') events.push(`error ${decoded.cause}`);
    else node.accept(decoded, 0);
  });
  for (const piece of pieces(bytes, sizes)) deframer.push(piece);
  // A sample takes two bytes of each channel at least.
  if (samples > bytes.length) throw new RangeError(`${samples} samples of ${bytes.length} bytes`);
  return [...events, JSON.stringify(node.errors), JSON.stringify(deframer.errors)].join('\n');
}

const sizes = fc.array(fc.nat(60), { maxLength: 6 });

describe('bytes of a link', () => {
  it('as frames: the same is received however they are cut', { timeout }, () => {
    const good = [stream('i16', false), stream('i24', false), stream('i16', true)];
    let survived = 0;
    fc.assert(
      fc.property(damaged(good), sizes, (bytes, cuts) => {
        const whole = received(bytes, []);
        expect(received(bytes, cuts)).toBe(whole);
        if (whole.includes('epoch')) survived++;
      }),
      { seed, numRuns: runs(0.3) },
    );
    // Or nothing but the first check was tried.
    expect(survived).toBeGreaterThan(runs(0.3) / 10);
  });

  it('as frames whose checksum holds: any body is a frame or an error', { timeout }, () => {
    const bodies = fc.oneof(
      fc.uint8Array({ maxLength: 120 }),
      damaged([Uint8Array.from([0, 0, 0, 0, 1, 1, 1, 0, 0, 128, 63, 1, 104, 0, 0])]),
    );
    const kinds = new Map<string, number>();
    fc.assert(
      fc.property(fc.nat(5), fc.nat(2), bodies, (kind, version, body) => {
        const frame = new NodeFrames(spec).frame(kind, [...body], version);
        const got: string[] = [];
        const deframer = new Deframer((bytes) => got.push(decodeFrame(bytes).kind));
        deframer.push(frame);
        expect(got).toHaveLength(1);
        kinds.set(got[0]!, (kinds.get(got[0]!) ?? 0) + 1);
      }),
      { seed, numRuns: runs(0.1) },
    );
    expect(kinds.get('error')).toBeGreaterThan(0);
    expect(kinds.size).toBeGreaterThan(1);
  });

  it('as lines of numbers: the same is received however they are cut', { timeout }, () => {
    const text = (lines: string[]) => new TextEncoder().encode(lines.join('\n'));
    const good = [
      text(['0,1', '12,1', '-13.5,0', '1e3,1', '# note', '7,0', '']),
      text(['0.1;2\t3', ' 4 , 5 ', '+6,7.25', '-0,99999999999999999999', '1,1', '']),
    ];
    const columns = (bytes: Uint8Array, cuts: readonly number[]) => {
      const events: string[] = [];
      let rows = 0;
      const stream = new ColumnStream(
        [
          { column: 0, decimals: 2 },
          { column: 1, decimals: 0 },
        ],
        {
          onEpoch: (first) => events.push(`epoch ${first}`),
          onGap: (n) => events.push(`gap ${n}`),
          onSamples: (planar, stride, n) => {
            rows += n;
            for (let i = 0; i < n; i++) events.push(`${planar[i]} ${planar[stride + i]}`);
          },
        },
      );
      for (const piece of pieces(bytes, cuts)) stream.push(piece);
      if (rows * 3 > bytes.length) throw new RangeError(`${rows} rows of ${bytes.length} bytes`);
      return [...events, JSON.stringify(stream.errors)].join('\n');
    };
    let rows = 0;
    fc.assert(
      fc.property(damaged(good), sizes, (bytes, cuts) => {
        const whole = columns(bytes, []);
        expect(columns(bytes, cuts)).toBe(whole);
        if (whole.includes('epoch')) rows++;
      }),
      { seed, numRuns: runs(0.25) },
    );
    expect(rows).toBeGreaterThan(runs(0.25) / 10);
  });
});
