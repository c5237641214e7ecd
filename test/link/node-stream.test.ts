import { describe, expect, it } from 'vitest';
import type { Expectation } from '../../src/config/station.ts';
import { Deframer } from '../../src/link/cobs.ts';
import { decodeFrame } from '../../src/link/frames.ts';
import { NodeStream } from '../../src/link/node-stream.ts';
import { NodeFrames, type SentNode } from '../support/sender.ts';

const anyNode: Expectation = { node: null, serialNumber: null, sampleRateHz: null, channels: null };
const spec: SentNode = {
  node: 7,
  rateHz: 40_960,
  format: 'i16',
  channels: [
    { name: 'h', unit: 'g', scale: 0.001 },
    { name: 'tach', unit: 'logic', scale: 1 },
  ],
  serialNumber: 'A1',
  firmware: '0.9',
};

function listen(expected: Partial<Expectation> = {}) {
  const events: string[] = [];
  const clock = { ms: 0 };
  const stream = new NodeStream(
    { ...anyNode, ...expected },
    {
      onEpoch: (description, first, because) =>
        events.push(`epoch ${because} of ${description.node} at ${first}`),
      onGap: (n) => events.push(`gap ${n}`),
      onSamples: (planar, stride, n) =>
        events.push(`h ${planar.subarray(0, n).join()} t ${planar.subarray(stride, stride + n).join()}`),
    },
  );
  const deframer = new Deframer((bytes) => {
    const frame = decodeFrame(bytes);
    if (frame.kind === 'error') throw new Error(frame.cause);
    stream.accept(frame, clock.ms);
  });
  const send = (...frames: Uint8Array[]) => {
    for (const frame of frames) deframer.push(frame);
  };
  return { events, stream, send, clock };
}

describe('the stream of a node', () => {
  it('delivers samples in order as one epoch', () => {
    const { events, send } = listen();
    const node = new NodeFrames(spec);
    send(
      node.describe(),
      node.samples(0, [1, 0, 2, 1]),
      node.samples(2, [3, 0]),
      node.describe(),
      node.samples(3, [4, 1]),
    );
    expect(events).toEqual(['epoch first of 7 at 0', 'h 1,2 t 0,1', 'h 3 t 0', 'h 4 t 1']);
  });

  it('counts and drops samples before the first DESCRIBE', () => {
    const { events, send, stream } = listen();
    const node = new NodeFrames(spec);
    send(node.samples(0, [1, 1]), node.samples(1, [1, 1]));
    expect(stream.standing).toEqual({ kind: 'undescribed' });
    send(node.describe(), node.samples(2, [5, 1]));
    expect(events).toEqual(['epoch first of 7 at 2', 'h 5 t 1']);
    expect(stream.errors['samples-before-describe']).toBe(2);
  });

  it('counts what a jump of the index leaves out', () => {
    const { events, send, stream } = listen();
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(0, [1, 0]));
    node.counter += 3;
    send(node.samples(100, [2, 0]));
    expect(events.slice(1)).toEqual(['h 1 t 0', 'gap 99', 'h 2 t 0']);
    expect(stream.errors['frames-lost']).toBe(3);
  });

  it('takes an index that goes back for a restart', () => {
    const { events, send, stream } = listen();
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(1000, [1, 0]), node.samples(0, [2, 0]));
    expect(events.slice(2)).toEqual(['epoch restarted of 7 at 0', 'h 2 t 0']);
    expect(stream.restarts).toBe(1);
  });

  it('takes a jump for a restart where the frame counter went back, also while the line was cut', () => {
    for (const cut of [false, true]) {
      const { events, send, stream } = listen();
      const node = new NodeFrames(spec, 500);
      send(node.describe(), node.samples(10, [1, 0]));
      if (cut) stream.reopened();
      const again = new NodeFrames(spec);
      send(again.describe(), again.samples(5000, [2, 0]), again.samples(5001, [3, 0]));
      expect(events.slice(2)).toEqual(['epoch restarted of 7 at 5000', 'h 2 t 0', 'h 3 t 0']);
    }
  });

  it('goes on in the same epoch after a cut, with a gap, once the node has said that it is the same', () => {
    const { events, send, stream } = listen();
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(0, [1, 0]));
    stream.reopened();
    node.counter += 1000;
    send(node.samples(50, [2, 0]), node.describe(), node.samples(60, [3, 0]));
    expect(events.slice(2)).toEqual(['gap 59', 'h 3 t 0']);
    expect(stream.errors).toMatchObject({ 'samples-before-describe': 1, 'frames-lost': 0 });
  });

  it('counts a wrapped frame counter as one on', () => {
    const { send, stream } = listen();
    const node = new NodeFrames(spec, 0xfffffffe);
    send(node.describe(), node.samples(0, [1, 0]));
    node.counter = 0;
    send(node.samples(1, [1, 0]));
    expect(stream.errors).toMatchObject({ 'frames-lost': 0, 'counter-back': 0 });
  });

  it.each([
    ['rate', { rateHz: 40_959 }],
    ['scale', { channels: [{ ...spec.channels[0]!, scale: 0.002 }, spec.channels[1]!] }],
    ['serial number', { serialNumber: 'A2' }],
    ['format', { format: 'i24' as const }],
  ])('begins an epoch where DESCRIBE gives another %s', (_what, change) => {
    const { events, send } = listen();
    const node = new NodeFrames(spec);
    const other = new NodeFrames({ ...spec, ...change }, 2);
    send(node.describe(), node.samples(0, [1, 0]), other.describe(), other.samples(1, [2, 0]));
    expect(events.slice(2)).toEqual(['epoch described-anew of 7 at 1', 'h 2 t 0']);
  });

  it('drops and counts what contradicts the description, or is beyond 2^53', () => {
    const { events, send, stream } = listen();
    const node = new NodeFrames(spec);
    const wide = new NodeFrames({ ...spec, format: 'i24' }, 1);
    const three = new NodeFrames(
      { ...spec, channels: [...spec.channels, { name: 'x', unit: 'g', scale: 1 }] },
      2,
    );
    send(
      node.describe(),
      wide.samples(0, [1, 0]),
      three.samples(0, [1, 2, 3]),
      node.samples(2n ** 60n, [1, 0]),
    );
    expect(events).toEqual([]);
    expect(stream.errors).toMatchObject({ 'samples-length': 2, 'index-beyond-2^53': 1 });
  });

  it('keeps what the node says of its health', () => {
    const { send, stream } = listen();
    const node = new NodeFrames(spec);
    send(node.describe(), node.health(21.5, 4.98, 3, 9));
    expect(stream.health).toMatchObject({
      temperatureC: 21.5,
      supplyV: 4.98,
      overRangeSamples: 3,
      lostSamples: 9,
    });
  });
});

describe('a node that is not the one expected', () => {
  const expected: Expectation = { node: 7, serialNumber: 'A1', sampleRateHz: 40_960, channels: ['h'] };
  it.each([
    ['node number', { node: 8 }, /node 8 speaks, node 7 is expected/],
    ['serial number', { serialNumber: 'B2' }, /"B2", "A1" is expected/],
    ['rate', { rateHz: 40_960.001 }, /40960.001 Hz, 40960 Hz is expected/],
    ['channel', { channels: [{ name: 'v', unit: 'g' as const, scale: 1 }] }, /no channel h among v/],
  ])('by its %s is heard and gives no samples', (_what, change, why) => {
    const { events, send, stream } = listen(expected);
    const node = new NodeFrames({ ...spec, ...change });
    send(
      node.describe(),
      node.samples(
        0,
        node.spec.channels.map(() => 1),
      ),
    );
    expect(stream.standing).toMatchObject({ kind: 'foreign', why: expect.stringMatching(why) });
    expect(events).toEqual([]);
    expect(stream.errors['foreign-samples']).toBe(1);
  });

  it('is told from the one that is, which gives samples', () => {
    const { events, send, stream } = listen(expected);
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(0, [1, 0]));
    expect(stream.standing.kind).toBe('accepted');
    expect(events).toHaveLength(2);
  });

  it('ends the epoch when cables are swapped, and another begins when they are put back', () => {
    const { events, send, stream } = listen({ serialNumber: 'A1' });
    const right = new NodeFrames(spec);
    const wrong = new NodeFrames({ ...spec, serialNumber: 'B2' }, 2);
    send(right.describe(), right.samples(0, [1, 0]), wrong.describe(), wrong.samples(1, [9, 0]));
    expect(stream.standing.kind).toBe('foreign');
    right.counter = 4;
    send(right.describe(), right.samples(2, [2, 0]));
    expect(events).toEqual(['epoch first of 7 at 0', 'h 1 t 0', 'epoch described-anew of 7 at 2', 'h 2 t 0']);
  });
});

describe('several nodes on one line', () => {
  const other = { ...spec, node: 8, serialNumber: 'B2' };

  it('leave the one that was heard first, or is expected, undisturbed', () => {
    for (const expected of [{}, { node: 7 }]) {
      const { events, send, stream } = listen(expected);
      const a = new NodeFrames(spec);
      const b = new NodeFrames(other);
      send(
        a.describe(),
        b.describe(),
        a.samples(0, [1, 0]),
        b.samples(900, [9, 9]),
        a.samples(1, [2, 0]),
        b.health(1, 1, 1, 1),
      );
      expect(events).toEqual(['epoch first of 7 at 0', 'h 1 t 0', 'h 2 t 0']);
      expect(stream.otherNodes).toEqual([{ node: 8, frames: 3 }]);
      expect(stream.health).toBeNull();
    }
  });

  it('are searched for the expected one', () => {
    const { events, send, stream } = listen({ node: 7 });
    const a = new NodeFrames(spec);
    const b = new NodeFrames(other);
    send(b.describe(), b.samples(0, [9, 9]));
    expect(stream.standing.kind).toBe('foreign');
    send(a.describe(), b.describe(), a.samples(0, [1, 0]));
    expect(stream.standing.kind).toBe('accepted');
    expect(events).toEqual(['epoch first of 7 at 0', 'h 1 t 0']);
  });

  it('are listened to in place of one that is no longer heard', () => {
    const { send, stream, clock } = listen({ node: 7 });
    const a = new NodeFrames(spec);
    const b = new NodeFrames(other);
    send(a.describe());
    clock.ms = 4000;
    send(b.describe());
    expect(stream.standing.kind).toBe('accepted');
    clock.ms = 5500;
    send(b.describe());
    expect(stream.standing).toMatchObject({ kind: 'foreign', why: 'node 8 speaks, node 7 is expected' });
  });

  it('are counted in a bounded table', () => {
    const { send, stream } = listen();
    send(new NodeFrames(spec).describe());
    for (let node = 100; node < 150; node++) send(new NodeFrames({ ...spec, node }).describe());
    expect(stream.otherNodes).toHaveLength(9);
    expect(stream.otherNodes.reduce((sum, { frames }) => sum + frames, 0)).toBe(50);
    expect(stream.otherNodes.find(({ node }) => node === null)?.frames).toBe(42);
  });
});
