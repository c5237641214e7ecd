/** One link over a line that does as it is told, on a clock that does too. */
import { describe, expect, it } from 'vitest';
import type { LinkSettings } from '../../src/config/station.ts';
import { type EpochStart, Link, type LinkOptions } from '../../src/link/link.ts';
import type { LinkCondition } from '../../src/link/link-health.ts';
import { RingReader } from '../../src/link/ring.ts';
import { OpenError, type TransportHandlers } from '../../src/link/transport.ts';
import { NodeFrames, type SentNode } from '../support/sender.ts';
import { FakeClock } from './fake-clock.ts';

const spec: SentNode = {
  node: 7,
  rateHz: 1000,
  format: 'i16',
  channels: [
    { name: 'h', unit: 'g', scale: 0.001 },
    { name: 'tach', unit: 'logic', scale: 1 },
  ],
  serialNumber: 'A1',
  firmware: '0.9',
};

const frames: LinkSettings = {
  id: 'node-1',
  transport: { kind: 'tcp', host: '127.0.0.1', port: 4001 },
  format: { kind: 'frames', expect: { node: 7, serialNumber: null, sampleRateHz: null, channels: null } },
  sensors: {},
};

const columns: LinkSettings = {
  ...frames,
  id: 'node-2',
  format: {
    kind: 'columns',
    sampleRateHz: 100,
    channels: [
      { name: 'x', column: 0, unit: 'g', scale: 0.001, decimals: 1, range: [-100, 100] },
      { name: 'y', column: 2, unit: 'm/s2', scale: 1, decimals: 0, range: null },
    ],
  },
};

class Host extends FakeClock {
  readonly epochs: EpochStart[] = [];
  readonly conditions: string[] = [];
  readonly news: { epoch: number; head: number }[] = [];
  onEpoch = (start: EpochStart) => void this.epochs.push(start);
  onSamples = (news: { epoch: number; head: number }) => void this.news.push(news);
  /** Changes of kind; the reason in words may change meanwhile. */
  onCondition = ({ kind }: LinkCondition) => {
    if (kind !== this.conditions.at(-1)) this.conditions.push(kind);
  };
}

function linked(settings: LinkSettings, options: Partial<LinkOptions> = {}) {
  const host = new Host();
  const line = { handlers: null as TransportHandlers | null, refuse: false, opens: 0 };
  const link = new Link(settings, { ringSeconds: 10, maxRingBytes: 10e6, ...options }, host, () => ({
    open: async (handlers) => {
      line.opens++;
      if (line.refuse) throw new OpenError('missing', '/dev/ttyX is not there', 'Plug the node in.');
      line.handlers = handlers;
    },
    close: async () => {
      line.handlers = null;
    },
  }));
  const send = (...pieces: Uint8Array[]) => {
    for (const piece of pieces) line.handlers?.onBytes(piece);
  };
  return { host, link, line, send };
}

/** A node that sends 100 samples every 100 ms for so long, and DESCRIBE each second. */
async function speak(
  host: Host,
  node: NodeFrames,
  send: (bytes: Uint8Array) => void,
  seconds: number,
  from = 0,
) {
  for (let k = 0; k < seconds * 10; k++) {
    if (k % 10 === 0) send(node.describe());
    send(
      node.samples(
        from + k * 100,
        Array.from({ length: 200 }, (_, i) => (i % 2 === 0 ? k * 100 + i / 2 : 1)),
      ),
    );
    await host.pass(100);
  }
  return from + seconds * 1000;
}

describe('a link of frames', () => {
  it('fills the ring, tells its host, and counts', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    await speak(host, new NodeFrames(spec), send, 20);
    expect(host.epochs).toMatchObject([
      {
        epoch: 1,
        firstIndex: 0,
        because: 'first',
        description: {
          node: 7,
          serialNumber: 'A1',
          firmware: '0.9',
          nominalRateHz: 1000,
          channels: [
            { name: 'h', unit: 'g', countRange: [-32768, 32767] },
            { name: 'tach', unit: 'logic', countRange: null },
          ],
        },
      },
    ]);
    expect(host.conditions).toEqual(['waiting', 'receiving']);
    expect(host.news.at(-1)).toEqual({ epoch: 1, head: 20_000 });
    const into = new Int32Array(500);
    const reader = new RingReader(host.epochs[0]!.memory);
    expect(reader.read(1, 0, 15_000, 500, into)).toBe('ok');
    expect([into[0], into[499]]).toEqual([15_000, 15_499]);
    const health = link.health();
    expect(health).toMatchObject({
      frames: 220,
      gaps: 0,
      restarts: 0,
      epoch: 1,
      head: 20_000,
      rate: { source: 'measured' },
      opened: 1,
    });
    expect(health.bytesPerS).toBeGreaterThan(4000);
    expect(health.bytesPerS).toBeLessThan(5000);
    expect(Math.abs(health.rate!.hz - 1000)).toBeLessThan(0.2);
    expect(Object.values(health.errors).every((count) => count === 0)).toBe(true);
  });

  it('counts gaps, over-range samples, and errors by cause', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(0, [32767, 1, -32768, 1, -32767, 1, 32766, 1]));
    const broken = node.samples(4, [1, 1]);
    broken[5]! ^= 1;
    send(broken, node.samples(5, [32767, 32767]), Uint8Array.of(9, 9, 0), node.frame(77, []));
    expect(link.health()).toMatchObject({
      overRange: { h: 3 },
      gaps: 1,
      missingSamples: 1,
      errors: { crc: 1, cobs: 1, 'unknown-kind': 1, 'frames-lost': 1 },
    });
    expect(link.health().overRange).not.toHaveProperty('tach');
    expect(new RingReader(host.epochs[0]!.memory).missingWithin(0, 6)).toBe(1);
  });

  it('begins an epoch when the node restarts, in the same memory, and measures its rate anew', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    await speak(host, new NodeFrames(spec), send, 15);
    expect(link.rate?.source).toBe('measured');
    await speak(host, new NodeFrames(spec), send, 1);
    expect(host.epochs.map(({ epoch, because }) => [epoch, because])).toEqual([
      [1, 'first'],
      [2, 'restarted'],
    ]);
    expect(host.epochs[1]!.memory).toBe(host.epochs[0]!.memory);
    expect(link.rate?.source).toBe('nominal');
    expect(new RingReader(host.epochs[0]!.memory).read(1, 0, 14_000, 100, new Int32Array(100))).toBe(
      'other-epoch',
    );
  });

  it('makes another ring where the node describes another shape', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    const node = new NodeFrames(spec);
    send(node.describe(), node.samples(0, [1, 1]));
    const three = new NodeFrames(
      { ...spec, channels: [...spec.channels, { name: 'a', unit: 'g', scale: 1 }] },
      2,
    );
    send(three.describe(), three.samples(1, [1, 2, 3]));
    expect(new RingReader(host.epochs[1]!.memory).channels).toBe(3);
    expect(host.epochs[1]).toMatchObject({ epoch: 2, firstIndex: 1, because: 'described-anew' });
    // Who still reads the old memory gets no more, and nothing wrong.
    expect(new RingReader(host.epochs[0]!.memory).read(1, 0, 1, 1, new Int32Array(1))).toBe('not-yet');
  });

  it('refuses a node whose samples would not fit into memory, and says so', async () => {
    const { host, link, send } = linked(frames, { ringSeconds: 60, maxRingBytes: 1e6 });
    link.start();
    await host.pass(10);
    const node = new NodeFrames({ ...spec, rateHz: 4e6 });
    for (let k = 0; k < 50; k++) {
      send(node.describe(), node.samples(k, [1, 1]));
      await host.pass(100);
    }
    expect(host.epochs).toEqual([]);
    expect(link.condition).toMatchObject({
      kind: 'too-large',
      why: expect.stringContaining('2 channels at 4000000 Hz'),
    });
  });

  it('raises a foreign node, gives it no samples, and recovers when the right one is back', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    let index = await speak(host, new NodeFrames(spec), send, 5);
    await speak(host, new NodeFrames({ ...spec, node: 8, serialNumber: 'B2' }), send, 12);
    expect(link.condition).toMatchObject({ kind: 'foreign-node', why: 'node 8 speaks, node 7 is expected' });
    expect(link.health()).toMatchObject({ head: index, node: { node: 8, serialNumber: 'B2' } });
    expect(link.health().errors['foreign-samples']).toBeGreaterThan(50);
    index = await speak(host, new NodeFrames(spec, 60), send, 2, 17_000);
    expect(link.condition.kind).toBe('receiving');
    expect(host.conditions).toEqual(['waiting', 'receiving', 'waiting', 'foreign-node', 'receiving']);
    expect(host.news.at(-1)!.head).toBe(index);
  });

  it('does not cry foreign when another node of a shared line speaks first', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    send(new NodeFrames({ ...spec, node: 8 }).describe());
    await host.pass(2000);
    await speak(host, new NodeFrames(spec), send, 2);
    expect(host.conditions).toEqual(['waiting', 'receiving']);
  });

  it('tells a line that cannot be opened, with what to do', async () => {
    const { host, link, line } = linked(frames);
    line.refuse = true;
    link.start();
    await host.pass(20_000);
    expect(link.condition).toMatchObject({
      kind: 'refused',
      why: '/dev/ttyX is not there. Plug the node in.',
    });
    expect(host.conditions).toEqual(['waiting', 'refused']);
    expect(link.health().refused).toBeGreaterThan(4);
  });

  it('tells silence, an unplugged line, and each from the other', async () => {
    const { host, link, line, send } = linked(frames);
    link.start();
    await host.pass(10);
    await speak(host, new NodeFrames(spec), send, 2);
    // It stops within a frame: part of one is on the line, and no word of a wrong baud rate.
    await host.pass(50);
    send(Uint8Array.of(1, 2, 3));
    await host.pass(4000);
    expect(link.condition.kind).toBe('silent');
    expect(host.conditions).toEqual(['waiting', 'receiving', 'silent']);
    // Back within the time that a DESCRIBE may take.
    await speak(host, new NodeFrames(spec, 500), send, 2, 6000);
    expect(link.condition.kind).toBe('receiving');
    expect(link.health()).toMatchObject({ epoch: 1, gaps: 1, missingSamples: 4000 });
    line.handlers?.onClosed('hung up');
    expect(link.condition).toMatchObject({ kind: 'unplugged', why: 'hung up' });
    await host.pass(1000);
    await speak(host, new NodeFrames(spec), send, 2);
    expect(link.condition.kind).toBe('receiving');
    expect(link.health()).toMatchObject({ epoch: 2, silent: 1, unplugged: 1, restarts: 1 });
  });

  it('tells bytes that are no frames, and opens the line anew now and then', async () => {
    const { host, link, line, send } = linked(frames);
    link.start();
    for (let k = 0; k < 450; k++) {
      await host.pass(100);
      send(Uint8Array.of(1, 2, 3, 0, 200, 7, 7));
    }
    expect(link.condition).toMatchObject({ kind: 'no-frames', why: expect.stringContaining('baud rate') });
    expect(line.opens).toBeGreaterThanOrEqual(4);
    expect(line.opens).toBeLessThanOrEqual(6);
  });

  it('tells a node that speaks but sends no samples', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    const node = new NodeFrames(spec);
    for (let k = 0; k < 10; k++) {
      send(node.describe(), node.health(20, 5, 0, 0));
      await host.pass(1000);
    }
    expect(link.condition.kind).toBe('no-samples');
    expect(link.health().nodeHealth).toMatchObject({ temperatureC: 20, supplyV: 5 });
  });

  it('stops, and starts again', async () => {
    const { host, link, send } = linked(frames);
    link.start();
    await host.pass(10);
    await speak(host, new NodeFrames(spec), send, 1);
    await link.stop();
    expect(link.condition.kind).toBe('stopped');
    expect(host.pending).toBe(0);
    link.start();
    await host.pass(10);
    await speak(host, new NodeFrames(spec, 100), send, 1, 9000);
    expect(link.condition.kind).toBe('receiving');
    expect(link.health().epoch).toBe(1);
  });
});

describe('a link of columns', () => {
  const lines = (from: number, n: number) =>
    new TextEncoder().encode(
      Array.from({ length: n }, (_, i) => `${(from + i) / 10};text;${-(from + i)}\r\n`).join(''),
    );

  it('takes its description from the settings', async () => {
    const { host, link, send } = linked(columns);
    link.start();
    await host.pass(10);
    send(lines(0, 50), lines(50, 51));
    expect(host.epochs).toMatchObject([
      {
        epoch: 1,
        firstIndex: 0,
        description: {
          node: null,
          nominalRateHz: 100,
          channels: [
            { name: 'x', unit: 'g', unitsPerCount: 0.0001, countRange: [-1000, 1000] },
            { name: 'y', unit: 'm/s2', unitsPerCount: 1, countRange: null },
          ],
        },
      },
    ]);
    const into = new Int32Array(100);
    const reader = new RingReader(host.epochs[0]!.memory);
    expect(reader.read(1, 0, 0, 100, into)).toBe('ok');
    expect([...into]).toEqual(Array.from({ length: 100 }, (_, i) => i + 1));
    expect(reader.read(1, 1, 0, 100, into)).toBe('ok');
    expect(into[99]).toBe(-100);
    expect(link.health()).toMatchObject({ frames: 100, head: 100, condition: { kind: 'receiving' } });
  });

  it('counts what clips, and a malformed line as a gap', async () => {
    const { host, link, send } = linked(columns);
    link.start();
    await host.pass(10);
    send(lines(0, 2), lines(998, 5), new TextEncoder().encode('oops;a;b\n'), lines(0, 1));
    expect(link.health()).toMatchObject({
      overRange: { x: 3 },
      gaps: 1,
      missingSamples: 1,
      errors: { 'malformed-line': 1 },
      frames: 7,
    });
    expect(new RingReader(host.epochs[0]!.memory).missingWithin(0, 8)).toBe(1);
  });

  it('begins an epoch after every cut', async () => {
    const { host, link, line, send } = linked(columns);
    link.start();
    await host.pass(10);
    send(lines(0, 20));
    line.handlers?.onClosed('hung up');
    await host.pass(1000);
    send(lines(0, 20));
    expect(host.epochs.map(({ epoch, because }) => [epoch, because])).toEqual([
      [1, 'first'],
      [2, 'reconnected'],
    ]);
  });
});
