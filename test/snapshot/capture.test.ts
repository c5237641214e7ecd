import { describe, expect, it } from 'vitest';
import { RingWriter } from '../../src/link/ring.ts';
import { Capture } from '../../src/snapshot/capture.ts';

const channels = 3;

/** Counts tell channel and index: a sample out of place shows. */
const countAt = (channel: number, index: number) => channel * 1_000_000 + index;

function append(ring: RingWriter, n: number): void {
  const first = ring.head;
  const planar = Int32Array.from({ length: channels * n }, (_, k) =>
    countAt(Math.floor(k / n), first + (k % n)),
  );
  ring.append(planar, n, n);
}

function ringFrom(
  firstIndex: number,
  samples: number,
): { ring: RingWriter; source: () => { memory: SharedArrayBuffer; epoch: number; epochFirst: number } } {
  const ring = new RingWriter(channels, samples);
  ring.beginEpoch(1, firstIndex);
  return { ring, source: () => ({ memory: ring.memory, epoch: 1, epochFirst: firstIndex }) };
}

function expectAligned(capture: Capture, order: readonly number[] = [0, 1, 2]) {
  const { counts, gaps } = capture.take();
  counts.forEach((channel, c) => {
    expect(Array.from(channel)).toEqual(
      Array.from({ length: channel.length }, (_, i) => countAt(order[c]!, capture.first + i)),
    );
  });
  return { samples: counts[0]!.length, gaps };
}

describe('a capture', () => {
  it('takes what is there at once and what follows when it comes, aligned over the channels', () => {
    const { ring, source } = ringFrom(500, 50_000);
    append(ring, 8000);
    const capture = new Capture(source(), [2, 0], 1000, 12_000);
    expect(capture.samples).toBe(7500);
    for (let k = 0; k < 10; k++) {
      append(ring, 700);
      capture.advance();
    }
    expect(capture.done).toBe(true);
    expect(capture.first).toBe(1000);
    expect(expectAligned(capture, [2, 0])).toEqual({ samples: 11_000, gaps: [] });
  });

  it('begins later where the ring holds no more, or the epoch began later', () => {
    const { ring, source } = ringFrom(0, 20_000);
    for (let k = 0; k < 10; k++) append(ring, 8000);
    const late = new Capture(source(), [0, 1, 2], 0, 80_000);
    // All of the ring: of a slow node's even a few thousand samples are seconds.
    expect(late.first).toBe(80_000 - 20_000);
    expect(late.done).toBe(true);
    expectAligned(late);
    const fresh = ringFrom(7777, 20_000);
    append(fresh.ring, 100);
    expect(new Capture(fresh.source(), [0], 0, 7800).first).toBe(7777);
  });

  it('is made longer while it grows, and not after', () => {
    const { ring, source } = ringFrom(0, 50_000);
    append(ring, 1000);
    const capture = new Capture(source(), [0, 1, 2], 0, 2000);
    capture.extend(3000);
    append(ring, 5000);
    capture.advance();
    expect(capture.done).toBe(true);
    capture.extend(6000);
    capture.advance();
    expect(expectAligned(capture)).toEqual({ samples: 3000, gaps: [] });
  });

  it('keeps what it has where the node restarts', () => {
    const { ring, source } = ringFrom(0, 50_000);
    append(ring, 4000);
    const capture = new Capture(source(), [0, 1, 2], 0, 9000);
    ring.beginEpoch(2, 0);
    append(ring, 3000);
    capture.advance();
    expect(capture.done).toBe(true);
    expect(expectAligned(capture)).toEqual({ samples: 4000, gaps: [] });
  });

  it('notes each stretch that never came, and reads 0 there', () => {
    const { ring, source } = ringFrom(0, 50_000);
    append(ring, 1000);
    ring.skip(37);
    append(ring, 1000);
    const capture = new Capture(source(), [1], 0, 5000);
    ring.skip(1);
    append(ring, 2962);
    capture.advance();
    const { counts, gaps } = capture.take();
    expect(gaps).toEqual([
      { at: 1000, samples: 37 },
      { at: 2037, samples: 1 },
    ]);
    expect(Array.from(counts[0]!.subarray(999, 1002))).toEqual([countAt(1, 999), 0, 0]);
  });

  it('counts everything as missing from the sixty-fourth gap on', () => {
    const { ring, source } = ringFrom(0, 50_000);
    const capture = new Capture(source(), [0], 0, 3000);
    for (let k = 0; k < 100; k++) {
      append(ring, 20);
      ring.skip(10);
      capture.advance();
    }
    const { gaps } = capture.take();
    expect(gaps).toHaveLength(64);
    expect(gaps.at(-1)).toEqual({ at: 63 * 30 + 20, samples: 3000 - 63 * 30 - 20 });
  });
});
