import { constants } from 'node:fs';
import { open } from 'node:fs/promises';
import { connect as connectTo, createServer, type Socket } from 'node:net';
import { describe, expect, it } from 'vitest';
import { Deframer } from '../../src/link/cobs.ts';
import { decodeFrame } from '../../src/link/frames.ts';
import { SimulatedMachine } from '../../src/simulate/machine.ts';
import { SimulatedNode } from '../../src/simulate/node.ts';
import { openPty } from '../../src/simulate/pty.ts';
import { Converter } from '../../src/simulate/sensor.ts';
import { bufferedSink, ptySink, socketSink } from '../../src/simulate/sinks.ts';

function source() {
  return new Converter(
    {
      seed: 1,
      nominalRateHz: 40_960,
      bits: 16,
      channels: ['h', 'v', 'a'].map((name) => ({
        name,
        unit: 'g',
        unitsPerCount: 2 ** -11,
        noiseGPerRtHz: 1e-4,
      })),
    },
    (rateHz) =>
      new SimulatedMachine(
        {
          seed: 1,
          shaft: { mainsHz: 50, poles: 4, ratedRpm: 1480 },
          vanes: 6,
          sources: { unbalanceMmS: 2 },
          points: ['horizontal', 'vertical', 'axial'],
        },
        rateHz,
      ),
  );
}

/** Every count of a run of the source, as a receiver should have them. */
function wanted(samples: number): number[] {
  const counts = new Int32Array(3 * samples);
  source().fill(counts, samples);
  return [...counts];
}

function collector() {
  const seen = { samples: 0, errors: 0, described: false, counts: [] as number[] };
  const deframer = new Deframer((bytes) => {
    const frame = decodeFrame(bytes);
    if (frame.kind === 'error') seen.errors++;
    if (frame.kind === 'describe')
      seen.described = frame.serialNumber === 'P1' && frame.channels.length === 3;
    if (frame.kind !== 'samples') return;
    seen.samples += frame.n;
    const view = new DataView(frame.payload.buffer, frame.payload.byteOffset, frame.payload.length);
    for (let at = 0; at < frame.payload.length; at += 2) seen.counts.push(view.getInt16(at, true));
  });
  return { seen, deframer };
}

describe('a node on a pseudo-terminal', () => {
  it('is read whole at the other side, count for count', async () => {
    const pty = await openPty();
    const device = await open(pty.path, constants.O_RDONLY | constants.O_NOCTTY | constants.O_NONBLOCK);
    const node = new SimulatedNode({ node: 3, serialNumber: 'P1' }, source(), ptySink(pty));
    const { seen, deframer } = collector();
    const chunk = Buffer.alloc(65_536);
    try {
      for (let t = 0.02; t < 1; t += 0.02) {
        node.advanceTo(t);
        while (seen.samples < node.counts.samples) {
          const { bytesRead } = await device
            .read(chunk, 0, chunk.length, null)
            .catch(() => ({ bytesRead: 0 }));
          deframer.push(chunk.subarray(0, bytesRead));
        }
      }
    } finally {
      await device.close();
      pty.close();
    }
    expect(node.counts.droppedBytes).toBe(0);
    expect(seen).toMatchObject({ errors: 0, described: true, samples: node.counts.samples });
    expect(seen.samples).toBeGreaterThan(39_000);
    expect(seen.counts).toEqual(wanted(seen.samples));
  });

  it('loses what nobody reads, counts it, and is whole again afterwards', async () => {
    const pty = await openPty();
    const device = await open(pty.path, constants.O_RDONLY | constants.O_NOCTTY | constants.O_NONBLOCK);
    const node = new SimulatedNode({ node: 3, serialNumber: 'P1' }, source(), ptySink(pty));
    const { seen, deframer } = collector();
    const chunk = Buffer.alloc(65_536);
    const drain = async () => {
      for (let idle = 0; idle < 10; ) {
        const { bytesRead } = await device.read(chunk, 0, chunk.length, null).catch(() => ({ bytesRead: 0 }));
        deframer.push(chunk.subarray(0, bytesRead));
        if (bytesRead > 0) idle = 0;
        else {
          idle++;
          await new Promise((resolve) => setTimeout(resolve, 10));
        }
      }
    };
    try {
      node.advanceTo(1);
      await drain();
      const { droppedFrames, lostSamples } = node.counts;
      // 250 kB were sent; a terminal holds some 20 kB unread, and never more than 64.
      expect(node.counts.droppedBytes).toBeGreaterThan(150_000);
      expect(seen.samples).toBeGreaterThan(1000);
      for (let t = 1.02; t < 1.5; t += 0.02) {
        node.advanceTo(t);
        await drain();
      }
      expect(node.counts.droppedFrames).toBe(droppedFrames);
      // Each frame that was cut off may spoil the one after it, which arrived whole, and no more.
      const missed = node.counts.samples - lostSamples - seen.samples;
      const broken = seen.errors + deframer.errors.cobs + deframer.errors.oversize;
      expect(missed).toBeGreaterThanOrEqual(0);
      expect(missed).toBeLessThanOrEqual(410 * broken);
      expect(broken).toBeLessThanOrEqual(droppedFrames);
    } finally {
      await device.close();
      pty.close();
    }
  });
});

describe('a node with memory before its line', () => {
  const bytes = (from: number, n: number) => Uint8Array.from({ length: n }, (_, k) => from + k);

  it('keeps what the line does not take, in order, and sends it first', () => {
    const line: number[] = [];
    let room = 0;
    const sink = bufferedSink((frame) => {
      const taken = Math.min(room, frame.length);
      line.push(...frame.subarray(0, taken));
      room -= taken;
      return taken;
    }, 20);
    expect(sink(bytes(0, 8))).toBe(8);
    const reused = bytes(8, 8);
    expect(sink(reused)).toBe(8);
    reused.fill(255);
    room = 3;
    expect(sink(bytes(16, 7))).toBe(7);
    expect(line).toEqual([0, 1, 2]);
    // 20 bytes wait: a frame more does not fit and goes as a whole.
    expect(sink(bytes(90, 1))).toBe(0);
    room = 22;
    expect(sink(bytes(23, 4))).toBe(4);
    room = 100;
    expect(sink(bytes(27, 1))).toBe(1);
    expect(line).toEqual(Array.from({ length: 28 }, (_, k) => k));
  });
});

describe('a node on a socket', () => {
  it('is read whole, and loses what finds no room', async () => {
    const server = createServer();
    await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
    const address = server.address();
    if (address === null || typeof address === 'string') throw new Error('no port');
    const accepted = new Promise<Socket>((resolve) => server.once('connection', resolve));
    const reader = connectTo(address.port, '127.0.0.1');
    const { seen, deframer } = collector();
    const socket = await accepted;
    const node = new SimulatedNode({ node: 3, serialNumber: 'P1' }, source(), socketSink(socket));
    node.advanceTo(0.2);
    reader.on('data', (chunk) => deframer.push(chunk));
    while (seen.samples < node.counts.samples) await new Promise((resolve) => setTimeout(resolve, 10));
    expect(seen).toMatchObject({ errors: 0, described: true });
    socket.cork();
    node.advanceTo(1);
    expect(node.counts.droppedFrames).toBeGreaterThan(10);
    reader.destroy();
    socket.destroy();
    server.close();
    const dropped = node.counts.droppedBytes;
    node.advanceTo(1.1);
    expect(node.counts.droppedBytes).toBeGreaterThan(dropped);
  });
});
