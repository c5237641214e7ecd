/** Real lines: pseudo-terminals and TCP sockets, with an independent node at the far end. */
import { spawn } from 'node:child_process';
import { once } from 'node:events';
import {
  closeSync,
  constants,
  mkdtempSync,
  openSync,
  rmSync,
  symlinkSync,
  unlinkSync,
  writeFileSync,
  writeSync,
} from 'node:fs';
import { createServer, type Server, type Socket } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, describe, expect, it } from 'vitest';
import type { LinkSettings } from '../../src/config/station.ts';
import { type EpochStart, Link, type LinkHost } from '../../src/link/link.ts';
import type { LinkCondition } from '../../src/link/link-health.ts';
import { RingReader } from '../../src/link/ring.ts';
import { SerialTransport } from '../../src/link/serial-transport.ts';
import { systemClock } from '../../src/link/system-clock.ts';
import type { OpenError } from '../../src/link/transport.ts';
import { openPty } from '../../src/simulate/pty.ts';
import { countAt, PacedSender, type SentNode } from '../support/sender.ts';
import { hasTool } from '../support/tools.ts';

const spec: SentNode = {
  node: 7,
  rateHz: 40_960,
  format: 'i16',
  channels: ['h', 'v', 'a'].map((name) => ({ name, unit: 'g' as const, scale: 2 ** -12 })),
  serialNumber: 'A1',
  firmware: '0.9',
};

/** What each test opened, closed in reverse whatever became of the test. */
const opened: (() => unknown)[] = [];
afterEach(async () => {
  for (const close of opened.splice(0).reverse()) await close();
});

function folder(): string {
  const path = mkdtempSync(join(tmpdir(), 'forebay-link-'));
  opened.push(() => rmSync(path, { recursive: true }));
  return path;
}

function linkTo(transport: LinkSettings['transport']) {
  const epochs: EpochStart[] = [];
  const conditions: LinkCondition[] = [];
  const host: LinkHost = {
    ...systemClock,
    onEpoch: (start) => epochs.push(start),
    onSamples: () => undefined,
    onCondition: (condition) => conditions.push(condition),
  };
  const expected = { node: 7, serialNumber: 'A1', sampleRateHz: 40_960, channels: ['h', 'v', 'a'] };
  const settings: LinkSettings = {
    id: 'node-1',
    transport,
    format: { kind: 'frames', expect: expected },
    sensors: {},
  };
  const link = new Link(settings, { ringSeconds: 10, maxRingBytes: 50e6 }, host);
  opened.push(() => link.stop());
  return { link, epochs, conditions };
}

function sendTo(write: (bytes: Uint8Array) => void, options = {}) {
  const sender = new PacedSender(spec, write, options);
  opened.push(() => sender.stop());
  return sender;
}

/**
 * A sink that holds back what a line has no room for, as flow control would: a busy machine must not look like a
 * lossy receiver.
 */
function patient(offer: (bytes: Uint8Array) => number): (bytes: Uint8Array) => void {
  let held: Uint8Array[] = [];
  const pump = () => {
    while (held.length > 0) {
      const first = held[0]!;
      const taken = offer(first);
      if (taken < first.length) {
        held[0] = first.subarray(taken);
        return;
      }
      held = held.slice(1);
    }
  };
  const timer = setInterval(pump, 2);
  opened.push(() => clearInterval(timer));
  return (bytes) => {
    held.push(bytes);
    pump();
  };
}

const pass = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));

async function until(what: string, condition: () => boolean, ms = 10_000): Promise<void> {
  const end = performance.now() + ms;
  while (!condition()) {
    if (performance.now() > end) throw new Error(`not within ${ms} ms: ${what}`);
    await pass(20);
  }
}

/** The newest second of each channel is, sample for sample, what was sent. */
function expectSentSamples(link: Link, epoch: EpochStart) {
  const reader = new RingReader(epoch.memory);
  const n = 40_960;
  const first = link.health().head - n;
  const into = new Int32Array(n);
  for (let channel = 0; channel < 3; channel++) {
    expect(reader.read(epoch.epoch, channel, first, n, into)).toBe('ok');
    const wrong = into.findIndex((count, i) => count !== countAt(first + i, channel, 3));
    expect(wrong).toBe(-1);
  }
  expect(reader.missingWithin(first, n)).toBe(0);
}

function expectCleanStream(link: Link) {
  const health = link.health();
  expect(health.gaps).toBe(0);
  // The port may be opened in the middle of a frame.
  expect(Object.values(health.errors).reduce((sum, count) => sum + count, 0)).toBeLessThanOrEqual(1);
}

describe('a serial line', () => {
  it('carries three channels of 40 960 Hz without loss', async () => {
    const pty = await openPty();
    opened.push(() => pty.close());
    const { link, epochs } = linkTo({ kind: 'serial', path: pty.path, baud: 3_000_000 });
    link.start();
    await until('open', () => link.health().opened === 1);
    sendTo(patient((bytes) => pty.offer(bytes))).start();
    await until('three seconds of samples', () => link.health().head > 3 * 40_960);
    expectSentSamples(link, epochs[0]!);
    expectCleanStream(link);
    // Six bytes a sample, and some for framing.
    expect(link.health().bytes).toBeGreaterThan(3 * 40_960 * 6);
  });

  it('does so at a baud rate beyond the table', async () => {
    const pty = await openPty();
    opened.push(() => pty.close());
    const { link } = linkTo({ kind: 'serial', path: pty.path, baud: 2_764_800 });
    link.start();
    await until('open', () => link.health().opened === 1);
    sendTo((bytes) => pty.write(bytes)).start();
    await until('samples', () => link.condition.kind === 'receiving');
  });

  it('that is unplugged under load is told, does not spin, and flows again when it is back', async () => {
    const path = join(folder(), 'node-1');
    let pty = await openPty();
    opened.push(() => pty.close());
    symlinkSync(pty.path, path);
    const { link, epochs, conditions } = linkTo({ kind: 'serial', path, baud: 3_000_000 });
    link.start();
    const sender = sendTo((bytes) => pty.write(bytes));
    sender.start();
    await until('samples', () => link.condition.kind === 'receiving');
    const samplesBefore = link.health().head;

    // With bytes unread, and more coming.
    pty.write(new Uint8Array(10_000).fill(7));
    pty.close();
    unlinkSync(path);
    await until('told', () => conditions.some(({ kind }) => kind === 'unplugged'), 2000);
    await until('refused', () => link.condition.kind === 'refused', 2000);
    expect(link.condition.why).toContain(`${path} is not there`);
    expect(link.condition.why).toMatch(/\((present: \/dev\/|no serial device is present)/);
    sender.stop();
    // Processor time of this process, not the clock: a reader that spins takes most of it.
    const before = process.cpuUsage();
    const opensBefore = link.health().refused;
    await pass(2000);
    const { user, system } = process.cpuUsage(before);
    expect((user + system) / 1e6).toBeLessThan(1);
    expect(link.health().refused - opensBefore).toBeLessThanOrEqual(4);

    pty = await openPty();
    symlinkSync(pty.path, path);
    sender.start();
    await until(
      'samples again',
      () => link.condition.kind === 'receiving' && link.health().head > samplesBefore,
    );
    // The node ran on: the same epoch, and what was lost is counted.
    expect(epochs).toHaveLength(1);
    expect(link.health()).toMatchObject({ unplugged: 1, opened: 2, epoch: 1 });
  });

  it('that falls silent is told, and flows again with the node', async () => {
    const pty = await openPty();
    opened.push(() => pty.close());
    const { link, epochs } = linkTo({ kind: 'serial', path: pty.path, baud: 3_000_000 });
    link.start();
    const sender = sendTo((bytes) => pty.write(bytes));
    sender.start();
    await until('samples', () => link.condition.kind === 'receiving');
    sender.stop();
    await until('told', () => link.condition.kind === 'silent', 6000);
    sender.restart();
    await until('samples again', () => link.condition.kind === 'receiving');
    expect(epochs.map(({ because }) => because)).toEqual(['first', 'restarted']);
  });

  it('has one reader at a time', async () => {
    const pty = await openPty();
    opened.push(() => pty.close());
    const { link } = linkTo({ kind: 'serial', path: pty.path, baud: 115_200 });
    link.start();
    const sender = sendTo((bytes) => pty.write(bytes), { trueRateHz: 4096 });
    sender.start();
    await until('samples', () => link.condition.kind === 'receiving');
    const second = new SerialTransport(pty.path, 9600);
    const handlers = { onBytes: () => undefined, onClosed: () => undefined };
    await expect(second.open(handlers)).rejects.toMatchObject({
      failure: 'busy',
      message: `${pty.path} is held by another program`,
    });
    const { head } = link.health();
    await until('samples still', () => link.health().head > head + 4096);
    await link.stop();
    const third = new SerialTransport(pty.path, 9600);
    opened.push(() => third.close());
    await third.open(handlers);
  });

  it('is refused where it is none, each with its reason', async () => {
    const handlers = { onBytes: () => undefined, onClosed: () => undefined };
    const failure = async (path: string) =>
      new SerialTransport(path, 115_200).open(handlers).then(
        () => 'opened',
        (error: OpenError) => error.failure,
      );
    const file = join(folder(), 'file');
    writeFileSync(file, 'text');
    expect(await failure(join(file, 'x'))).toBe('missing');
    expect(await failure('/dev/no-such-port')).toBe('missing');
    expect(await failure(file)).toBe('unfit');
    expect(await failure('/dev/null')).toBe('unfit');
  });

  it.runIf(hasTool('socat'))('made by socat carries the same', async () => {
    const path = join(folder(), 'node');
    const far = join(folder(), 'far');
    const socat = spawn('socat', [`pty,raw,echo=0,link=${path}`, `pty,raw,echo=0,link=${far}`], {
      stdio: 'ignore',
    });
    opened.push(() => socat.kill('SIGKILL'));
    const { link, epochs } = linkTo({ kind: 'serial', path, baud: 3_000_000 });
    link.start();
    await until('open', () => link.health().opened === 1);
    const fd = openSync(far, constants.O_WRONLY | constants.O_NOCTTY | constants.O_NONBLOCK);
    opened.push(() => closeSync(fd));
    const sender = sendTo(
      patient((bytes) => {
        try {
          return writeSync(fd, bytes);
        } catch {
          return 0;
        }
      }),
    );
    sender.start();
    await until('two seconds of samples', () => link.health().head > 2 * 40_960);
    expectSentSamples(link, epochs[0]!);
    expectCleanStream(link);
    sender.stop();
    socat.kill('SIGKILL');
    await until('unplugged', () => ['unplugged', 'refused'].includes(link.condition.kind));
    expect(link.health().unplugged).toBe(1);
  });
});

describe('a TCP line', () => {
  async function serve(port = 0): Promise<{ server: Server; sockets: Socket[]; port: number }> {
    const sockets: Socket[] = [];
    const server = createServer((socket) => {
      socket.on('error', () => undefined);
      sockets.push(socket);
    });
    server.listen(port, '127.0.0.1');
    await once(server, 'listening');
    opened.push(() => {
      for (const socket of sockets) socket.destroy();
      server.close();
    });
    return { server, sockets, port: (server.address() as { port: number }).port };
  }

  it('carries three channels of 40 960 Hz without loss', async () => {
    const { sockets, port } = await serve();
    const { link, epochs } = linkTo({ kind: 'tcp', host: '127.0.0.1', port });
    link.start();
    await until('connected', () => sockets.length === 1);
    sendTo((bytes) => sockets[0]!.write(bytes)).start();
    await until('three seconds of samples', () => link.health().head > 3 * 40_960);
    expectSentSamples(link, epochs[0]!);
    expectCleanStream(link);
  });

  it('that is refused, cut, silent: each is told, and flows again', async () => {
    const first = await serve();
    const { link, conditions } = linkTo({ kind: 'tcp', host: '127.0.0.1', port: first.port });
    link.start();
    await until('connected', () => first.sockets.length === 1);
    const sender = sendTo((bytes) => first.sockets.at(-1)?.write(bytes), { trueRateHz: 4096 });
    sender.start();
    await until('samples', () => link.condition.kind === 'receiving');

    first.sockets[0]!.end();
    await until('told of the end', () => conditions.some(({ kind }) => kind === 'unplugged'));
    await until('samples again', () => link.condition.kind === 'receiving');

    sender.stop();
    await until('told of silence', () => link.condition.kind === 'silent', 6000);
    sender.start();
    await until('samples after silence', () => link.condition.kind === 'receiving');

    sender.stop();
    first.server.close();
    for (const socket of first.sockets) socket.destroy();
    await until('told of refusal', () => link.condition.kind === 'refused', 6000);
    expect(link.condition.why).toContain('ECONNREFUSED');
    const again = await serve(first.port);
    const late = sendTo((bytes) => again.sockets.at(-1)?.write(bytes), { trueRateHz: 4096 });
    late.start();
    await until('samples after refusal', () => link.condition.kind === 'receiving');
    expect(link.health()).toMatchObject({ silent: 1 });
  }, 40_000);

  it('to a host that does not exist is told as missing', async () => {
    const { link } = linkTo({ kind: 'tcp', host: 'no-such-host.invalid', port: 1 });
    link.start();
    await until('refused', () => link.condition.kind === 'refused');
    expect(link.condition.why).toMatch(/no-such-host\.invalid/);
  });
});
