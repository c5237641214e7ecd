/**
 * A broker inside the agent, for trying out: on loopback only, MQTT 3.1.1, everything in memory, and nothing for who is
 * away but what is retained. Only the agent publishes under its site; others on this machine read, ask, and write the
 * topics that the station takes commands from.
 */

import { randomBytes } from 'node:crypto';
import { createServer, type Server, type Socket } from 'node:net';
import { Aedes, type AedesPublishPacket, type Client } from 'aedes';
import { ForebayError } from '../config/errors.ts';
import { PacketGuard } from './packet-guard.ts';

export interface EmbeddedBrokerSettings {
  /** 0: any that is free. */
  readonly port: number;
  readonly maxPacketBytes: number;
  readonly maxClients: number;
  /** What others than the agent may publish. */
  writable(topic: string): boolean;
}

const agentUser = 'forebay-agent';

export class EmbeddedBroker {
  readonly #settings: EmbeddedBrokerSettings;
  readonly #password = randomBytes(24).toString('base64url');
  readonly #agents = new WeakSet<Client>();
  readonly #sockets = new Set<Socket>();
  readonly #server: Server;
  #aedes: Aedes | null = null;

  private constructor(settings: EmbeddedBrokerSettings) {
    this.#settings = settings;
    this.#server = createServer((socket) => this.#admit(socket));
  }

  static async open(settings: EmbeddedBrokerSettings): Promise<EmbeddedBroker> {
    const broker = new EmbeddedBroker(settings);
    try {
      await broker.#listen();
    } catch (error) {
      // The timers of aedes would keep the process for ever.
      await broker.close();
      throw error;
    }
    return broker;
  }

  get port(): number {
    const address = this.#server.address();
    return typeof address === 'object' && address !== null ? address.port : 0;
  }

  /** What the agent signs in with; drawn at each start. */
  get credentials(): { username: string; password: string } {
    return { username: agentUser, password: this.#password };
  }

  async close(): Promise<void> {
    const ended = new Promise<void>((resolve) => this.#server.close(() => resolve()));
    await new Promise<void>((resolve) => this.#aedes?.close(() => resolve()) ?? resolve());
    for (const socket of this.#sockets) socket.destroy();
    await ended;
  }

  async #listen(): Promise<void> {
    this.#aedes = await Aedes.createBroker({
      connectTimeout: 10_000,
      queueLimit: 100,
      maxClientsIdLength: 128,
      preConnect: (_, packet, done) => {
        // What aedes keeps for an absent subscriber has no bound.
        packet.clean = true;
        done(null, true);
      },
      authenticate: (client, username, password, done) => {
        // A name is not a right: only the agent knows the word that was drawn at this start.
        const claims = username === agentUser;
        const isAgent = claims && password?.toString() === this.#password;
        if (isAgent) this.#agents.add(client);
        done(null, isAgent || !claims);
      },
      authorizePublish: (client, packet, done) => {
        if (client === null || this.#agents.has(client)) {
          done(null);
          return;
        }
        if (!this.#settings.writable(packet.topic)) {
          done(new Error('only the agent publishes here'));
          return;
        }
        // Memory for what nobody empties again is not given away.
        (packet as AedesPublishPacket).retain = false;
        done(null);
      },
    });
    await new Promise<void>((resolve, reject) => {
      const { port } = this.#settings;
      this.#server.once('error', (error: NodeJS.ErrnoException) => {
        if (error.code !== 'EADDRINUSE' && error.code !== 'EACCES') {
          reject(error);
          return;
        }
        const message = `port ${port} of 127.0.0.1 cannot be opened for the embedded broker (${error.code})`;
        reject(new ForebayError('uplink.busy-port', message, { cause: error }));
      });
      this.#server.listen(port, '127.0.0.1', resolve);
    });
  }

  #admit(socket: Socket): void {
    if (this.#sockets.size >= this.#settings.maxClients || this.#aedes === null) {
      socket.destroy();
      return;
    }
    this.#sockets.add(socket);
    socket.on('close', () => this.#sockets.delete(socket));
    const guard = new PacketGuard(this.#settings.maxPacketBytes, () => socket.destroy());
    this.#aedes.handle(socket);
    // `data` comes with each read of aedes, before its parser sees the bytes.
    socket.on('data', (chunk: Buffer) => {
      if (guard.filter(chunk) === null) socket.destroy();
    });
  }
}
