/** A TCP proxy that stalls, cuts and slows what passes through it. */
import { once } from 'node:events';
import { connect, createServer, type Server, type Socket } from 'node:net';

export class FaultyLink {
  readonly port: number;
  readonly #server: Server;
  readonly #pairs = new Set<[Socket, Socket]>();
  #stalled = false;
  #refusing = false;
  /** Bytes per second each way; null: as fast as it goes. */
  bytesPerS: number | null = null;
  /** What each piece takes on its way. */
  delayMs = 0;

  private constructor(server: Server, port: number) {
    this.#server = server;
    this.port = port;
  }

  static async start(target: number): Promise<FaultyLink> {
    const server = createServer({ allowHalfOpen: true });
    server.listen(0, '127.0.0.1');
    await once(server, 'listening');
    const address = server.address();
    if (address === null || typeof address === 'string') throw new Error('no port');
    const proxy = new FaultyLink(server, address.port);
    server.on('connection', (socket) => proxy.#join(socket, target));
    return proxy;
  }

  get connections(): number {
    return this.#pairs.size;
  }

  /** Bytes are taken and go nowhere; nobody is told. */
  stall(): void {
    this.#stalled = true;
  }

  flow(): void {
    this.#stalled = false;
    for (const pair of this.#pairs) for (const socket of pair) socket.emit('flow');
  }

  /** Resets every connection there is. */
  cut(): void {
    for (const pair of this.#pairs) for (const socket of pair) socket.resetAndDestroy();
    this.#pairs.clear();
  }

  refuse(refusing: boolean): void {
    this.#refusing = refusing;
  }

  async stop(): Promise<void> {
    this.cut();
    this.#server.close();
    await once(this.#server, 'close');
  }

  #join(near: Socket, target: number): void {
    if (this.#refusing) {
      near.resetAndDestroy();
      return;
    }
    const far = connect(target, '127.0.0.1');
    const pair: [Socket, Socket] = [near, far];
    this.#pairs.add(pair);
    const drop = () => {
      near.destroy();
      far.destroy();
      this.#pairs.delete(pair);
    };
    this.#carry(near, far);
    this.#carry(far, near);
    for (const socket of pair) {
      socket.on('error', drop);
      socket.on('close', drop);
    }
  }

  #carry(from: Socket, to: Socket): void {
    let chain = Promise.resolve();
    from.on('data', (chunk: Buffer) => {
      from.pause();
      const dueMs = performance.now() + this.delayMs;
      chain = chain
        .then(async () => {
          // A long way is no narrow one: what comes meanwhile is on its way too.
          if (this.delayMs > 0) from.resume();
          const early = dueMs - performance.now();
          if (early > 0) await sleep(early);
          if (this.bytesPerS !== null) await sleep((chunk.length / this.bytesPerS) * 1000);
          while (this.#stalled) await new Promise((resolve) => from.once('flow', resolve));
          if (!to.destroyed) to.write(chunk);
          from.resume();
        })
        .catch(() => undefined);
    });
    from.on('end', () => void chain.then(() => to.end()));
  }
}

export function sleep(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms));
}
