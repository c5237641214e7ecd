import { describe, expect, it } from 'vitest';
import { Deframer } from '../../src/link/cobs.ts';
import { decodeFrame, type Frame } from '../../src/link/frames.ts';
import { unpackCounts } from '../../src/link/unpack.ts';
import { SimulatedNode } from '../../src/simulate/node.ts';
import type { SampleSource } from '../../src/simulate/sensor.ts';

type Of<Kind extends Frame['kind']> = Extract<Frame, { kind: Kind }>;

/** Counts that say which sample and channel they are. */
function ramp(rateHz = 1000): SampleSource {
  let at = 0;
  return {
    nominalRateHz: 1000,
    rateHz,
    bits: 16,
    channels: ['x', 'y'].map((name) => ({ name, unit: 'g', unitsPerCount: 0.001 })),
    overRange: 3,
    fill(counts, n) {
      for (let i = 0; i < n; i++, at++) {
        counts[2 * i] = at % 30_000;
        counts[2 * i + 1] = -(at % 30_000);
      }
    },
  };
}

function receiver() {
  const frames: (Frame & { counts?: number[] })[] = [];
  const deframer = new Deframer((bytes) => {
    const frame = decodeFrame(bytes);
    if (frame.kind !== 'samples') {
      frames.push(frame);
      return;
    }
    const counts = new Int32Array(2 * frame.n);
    unpackCounts(frame.payload, 'i16', 2, frame.n, counts, frame.n);
    frames.push({ ...frame, payload: new Uint8Array(0), counts: [...counts.subarray(0, frame.n)] });
  });
  const of = <Kind extends Frame['kind']>(kind: Kind) =>
    frames.filter((frame): frame is Of<Kind> & { counts?: number[] } => frame.kind === kind);
  return { frames, of, deframer };
}

const settings = { node: 9, serialNumber: 'S9', frameSamples: 10 };

function connected(source = ramp(), more: { frameSamples?: number } = {}) {
  const line = receiver();
  const node = new SimulatedNode({ ...settings, ...more }, source, (bytes) => {
    line.deframer.push(bytes);
    return bytes.length;
  });
  return { ...line, node };
}

describe('a simulated node', () => {
  it('sends DESCRIBE first and every 2 s of samples, HEALTH every 30 s, and every sample once', () => {
    const { node, of, frames } = connected();
    node.advanceTo(60);
    expect(frames[0]?.kind).toBe('describe');
    expect(of('error')).toEqual([]);
    expect(of('describe').length).toBe(30);
    expect(of('describe')[0]).toMatchObject({
      node: 9,
      rateHz: 1000,
      format: 'i16',
      serialNumber: 'S9',
      channels: [{ name: 'x', unit: 'g' }, { name: 'y' }],
    });
    expect(of('health').length).toBe(2);
    expect(of('health')[0]).toMatchObject({ overRangeSamples: 3, lostSamples: 0 });
    const indices = of('samples').map(({ firstIndex }) => firstIndex);
    expect(indices).toEqual(Array.from({ length: 6000 }, (_, k) => 10 * k));
    expect(
      of('samples').every(({ firstIndex, counts }) => counts?.[9] === ((firstIndex ?? 0) + 9) % 30_000),
    ).toBe(true);
    const counters = frames.map((frame) => ('counter' in frame ? frame.counter : -1));
    expect(counters).toEqual(counters.map((_, k) => k));
  });

  it('sends what is due by then and no more, however the calls bunch', () => {
    const { node, of } = connected();
    for (const elapsedS of [0.001, 0.0099, 0.01, 0.01, 0.0349, 0.2, 0.2]) node.advanceTo(elapsedS);
    expect(of('samples').length).toBe(20);
    expect(node.counts).toMatchObject({ samples: 200, lostSamples: 0, frames: 21 });
  });

  it('keeps the pace of its own clock, though it claims the nominal rate', () => {
    const { node, of } = connected(ramp(1030));
    for (let t = 0; t <= 10; t += 0.1) node.advanceTo(t);
    expect(Math.abs(of('samples').length * 10 - 10_300)).toBeLessThanOrEqual(110);
    expect(of('describe')[0]?.rateHz).toBe(1000);
  });

  it('does not send late what its converter could not have kept: the index jumps', () => {
    const { node, of } = connected();
    node.advanceTo(0.1);
    node.advanceTo(3.1, 0.5);
    node.advanceTo(3.2, 0.5);
    const indices = of('samples').map(({ firstIndex }) => firstIndex ?? 0);
    expect(indices[9]).toBe(90);
    expect(indices[10]).toBe(3100);
    expect(node.counts.lostSamples).toBe(3000);
  });

  it('stalls: nothing is sent, the index goes on, and HEALTH says what was lost', () => {
    const { node, of } = connected();
    node.advanceTo(1);
    node.stallFor(0.5);
    for (let t = 1; t <= 31; t += 0.1) node.advanceTo(t);
    const indices = of('samples').map(({ firstIndex }) => firstIndex ?? 0);
    const jump = indices.findIndex((index, k) => k > 0 && index !== (indices[k - 1] ?? 0) + 10);
    expect([indices[jump - 1], indices[jump]]).toEqual([990, 1500]);
    expect(of('health')[0]?.lostSamples).toBe(500);
    // The index that was skipped took its samples along.
    expect(of('samples')[jump]?.counts?.[0]).toBe(1500);
  });

  it('corrupts so many frames, which the checksum or the stuffing gives away, and no other', () => {
    const { node, of, deframer } = connected();
    node.advanceTo(1);
    node.corrupt(5);
    node.advanceTo(1.5);
    expect(of('error').length + deframer.errors.cobs).toBe(5);
    expect(of('samples').length).toBe(150 - 5);
  });

  it('babbles without harm to the frames before it', () => {
    const { node, of } = connected();
    node.advanceTo(0.1);
    node.babble(Uint8Array.of(1, 2, 3, 0, 0, 77));
    node.advanceTo(0.3);
    // The frame that the last stray byte stuck to is lost, and no other.
    expect(of('samples').length).toBe(29);
  });

  it('restarts at index 0 and frame 0 with a DESCRIBE, without losing its pace', () => {
    const { node, of, frames } = connected();
    node.advanceTo(1);
    const before = frames.length;
    node.restart();
    node.advanceTo(1.5);
    expect(frames[before]).toMatchObject({ kind: 'describe', counter: 0 });
    expect(frames[before + 1]).toMatchObject({ kind: 'samples', firstIndex: 0 });
    expect(of('samples').length).toBe(150);
  });

  it('is exchanged for another one, which says so', () => {
    const { node, of } = connected();
    node.advanceTo(0.5);
    node.exchange('S10');
    node.advanceTo(1);
    expect(of('describe').map(({ serialNumber }) => serialNumber)).toEqual(['S9', 'S10']);
  });

  it('drops what the line has no room for and counts it, as a UART does', () => {
    const line = receiver();
    let room = 2000;
    const node = new SimulatedNode(settings, ramp(), (bytes) => {
      const taken = Math.min(room, bytes.length);
      room -= taken;
      line.deframer.push(bytes.subarray(0, taken));
      return taken;
    });
    node.advanceTo(0.5);
    expect(node.counts.bytes).toBe(2000);
    expect(node.counts.droppedFrames).toBe(node.counts.frames - line.frames.length);
    expect(node.counts.droppedFrames).toBeGreaterThan(5);
    expect(node.counts.lostSamples).toBe(10 * node.counts.droppedFrames);
    room = Number.POSITIVE_INFINITY;
    node.advanceTo(1);
    // Half a frame was on the line: it spoils itself and the next one, which carries on where the stuffing broke.
    const arrived = line.of('samples').length;
    expect(arrived).toBeGreaterThanOrEqual(100 - node.counts.droppedFrames - 1);
    expect(line.of('samples').at(-1)?.firstIndex).toBe(990);
  });

  it('runs in real time: a tenth of a second is about a tenth of the rate, and none after stop', async () => {
    const { node } = connected();
    node.start();
    node.start();
    while (node.counts.samples < 100) await new Promise((resolve) => setTimeout(resolve, 10));
    node.stop();
    const { samples } = node.counts;
    await new Promise((resolve) => setTimeout(resolve, 50));
    expect(node.counts.samples).toBe(samples);
    expect(samples % 10).toBe(0);
  });

  it('refuses a frame of no samples or of more than fit', () => {
    expect(() => connected(ramp(), { frameSamples: 0 })).toThrow(/do not make a frame/);
    expect(() => connected(ramp(), { frameSamples: 3000 })).toThrow(/1 to 2042/);
  });
});
