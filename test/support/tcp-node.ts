/** A sensor node behind a serial device server: whoever connects gets its samples, at its pace, from known counts. */
import { once } from 'node:events';
import { createServer, type Server, type Socket } from 'node:net';
import { PacedSender, type SentNode } from './sender.ts';

export class TcpNode {
  readonly port: number;
  readonly sender: PacedSender;
  readonly #server: Server;
  readonly #sockets: Set<Socket>;

  private constructor(server: Server, sockets: Set<Socket>, port: number, sender: PacedSender) {
    this.#server = server;
    this.#sockets = sockets;
    this.port = port;
    this.sender = sender;
  }

  /** @param countAt the count of a channel at a sample index. */
  static async start(
    spec: SentNode,
    countAt: (channel: number, index: number) => number,
    frameSamples = 512,
  ): Promise<TcpNode> {
    const sockets = new Set<Socket>();
    const server = createServer((socket) => {
      sockets.add(socket);
      socket.on('close', () => sockets.delete(socket));
      socket.on('error', () => socket.destroy());
    }).listen(0, '127.0.0.1');
    await once(server, 'listening');
    const address = server.address();
    if (address === null || typeof address === 'string') throw new Error('no port');
    const width = spec.channels.length;
    const counts = (first: number, n: number) => {
      const interleaved = new Int32Array(n * width);
      for (let i = 0; i < n; i++)
        for (let c = 0; c < width; c++) interleaved[i * width + c] = countAt(c, first + i);
      return interleaved;
    };
    const write = (bytes: Uint8Array) => {
      for (const socket of sockets) socket.write(bytes);
    };
    const sender = new PacedSender(spec, write, { frameSamples, counts });
    return new TcpNode(server, sockets, address.port, sender);
  }

  /** Begins once somebody listens, so that the first sample that is heard is the first that there is. */
  async begin(): Promise<void> {
    if (this.#sockets.size === 0) await once(this.#server, 'connection');
    this.sender.start();
  }

  async stop(): Promise<void> {
    this.sender.stop();
    for (const socket of this.#sockets) socket.destroy();
    this.#server.close();
    await once(this.#server, 'close');
  }
}
