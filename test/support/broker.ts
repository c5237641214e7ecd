/** Brokers that are no mosquitto: aedes as it comes, and a listener that answers CONNECT with what it is told. */
import { once } from 'node:events';
import { createServer, type Server, type Socket } from 'node:net';
import type { Duplex } from 'node:stream';
import { Aedes } from 'aedes';

export interface TestBroker {
  port: number;
  stop(): Promise<void>;
}

export async function startAedes(): Promise<TestBroker> {
  const aedes = await Aedes.createBroker();
  const { port, stop } = await listen((socket) => aedes.handle(socket));
  return {
    port,
    stop: async () => {
      await new Promise<void>((resolve) => aedes.close(resolve));
      await stop();
    },
  };
}

export interface Answering extends TestBroker {
  /** Protocol version of each CONNECT that came. */
  versions: number[];
}

/** `answer`: the bytes sent upon a CONNECT of that version; null: hang up; undefined: nothing. */
export async function startAnswering(
  answer: (version: number, count: number) => Uint8Array | null | undefined,
): Promise<Answering> {
  const versions: number[] = [];
  const broker = await listen((socket) => {
    socket.once('data', (chunk: Buffer) => {
      // MQTT 3.1.1, 3.1.2: two bytes of header here, the name "MQTT" with its length, the level.
      const version = chunk[chunk.indexOf('MQTT') + 4]!;
      versions.push(version);
      const bytes = answer(version, versions.length);
      if (bytes === null) socket.end();
      else if (bytes !== undefined) socket.write(bytes);
    });
  });
  return { ...broker, versions };
}

/** CONNACK of 3.1.1 (3.2) or of 5 with no properties. */
export const connack = (version: number, code: number): Uint8Array =>
  Uint8Array.from(version === 5 ? [0x20, 3, 0, code, 0] : [0x20, 2, 0, code]);

function listen(take: (socket: Socket) => void): Promise<TestBroker> {
  const sockets = new Set<Socket>();
  const server = createServer((socket) => {
    sockets.add(socket);
    socket.on('close', () => sockets.delete(socket));
    socket.on('error', () => socket.destroy());
    take(socket);
  });
  return opened(server, sockets);
}

/** Opens a server on a port of its own. @param sockets what is cut when it stops. */
export async function opened(server: Server, sockets: ReadonlySet<Duplex>): Promise<TestBroker> {
  server.listen(0, '127.0.0.1');
  await once(server, 'listening');
  const address = server.address();
  if (address === null || typeof address === 'string') throw new Error('no port');
  return {
    port: address.port,
    stop: async () => {
      for (const socket of sockets) socket.destroy();
      server.close();
      await once(server, 'close');
    },
  };
}
