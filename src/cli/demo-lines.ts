/** The lines between the demo's nodes and the agent: pseudo-terminals, or TCP where there are none. */

import { createServer, type Server, type Socket } from 'node:net';
import type { Transport } from '../config/station.ts';
import { openPty, type Pty } from '../simulate/pty.ts';
import { ptySink, type Sink, socketSink } from '../simulate/sinks.ts';

interface DemoLine {
  readonly transport: Transport;
  readonly sink: Sink;
  close(): void;
}

export interface DemoLines {
  readonly lines: readonly DemoLine[];
  /** Which transport it is, in words. */
  readonly said: string;
}

/** Baud of the line: 3 channels at 40 960 Hz need 2.5 million. A pseudo-terminal carries any. */
const baud = 3_000_000;
const loopback = '127.0.0.1';

export async function openLines(count: number): Promise<DemoLines> {
  const ptys: Pty[] = [];
  try {
    for (let k = 0; k < count; k++) ptys.push(await openPty());
  } catch (error) {
    for (const pty of ptys) pty.close();
    const lines = await Promise.all(Array.from({ length: count }, openTcpLine));
    return { lines, said: `TCP on loopback, as from a serial device server (${(error as Error).message})` };
  }
  const lines = ptys.map((pty): DemoLine => {
    const transport = { kind: 'serial', path: pty.path, baud } as const;
    return { transport, sink: ptySink(pty), close: () => pty.close() };
  });
  return {
    lines,
    said: `pseudo-terminals (${ptys.map(({ path }) => path).join(', ')}), opened as serial devices`,
  };
}

/** A server that hands the line to whoever connected last. */
async function openTcpLine(): Promise<DemoLine> {
  let present: { socket: Socket; sink: Sink } | null = null;
  const server = createServer((socket) => {
    present?.socket.destroy();
    present = { socket, sink: socketSink(socket) };
    socket.on('error', () => socket.destroy());
  });
  const port = await listening(server);
  return {
    transport: { kind: 'tcp', host: loopback, port },
    // Nobody there: the bytes go nowhere, as on an open cable.
    sink: (bytes) => present?.sink(bytes) ?? bytes.length,
    close: () => {
      present?.socket.destroy();
      server.close();
    },
  };
}

/** A TCP port on loopback that is free now. */
export async function freePort(): Promise<number> {
  const server = createServer();
  const port = await listening(server);
  await new Promise((resolve) => server.close(resolve));
  return port;
}

function listening(server: Server): Promise<number> {
  return new Promise((resolve, reject) => {
    server.once('error', reject);
    server.listen(0, loopback, () => {
      const address = server.address();
      if (address === null || typeof address === 'string') reject(new Error('no port on loopback'));
      else resolve(address.port);
    });
  });
}
