/** A TCP socket: a serial device server, or a node that speaks TCP itself. */

import { connect, type Socket } from 'node:net';
import {
  codeOf,
  OpenError,
  type OpenFailure,
  type Transport,
  type TransportHandlers,
  textOf,
} from './transport.ts';

const READ_BUFFER_BYTES = 65_536;
const KEEPALIVE_AFTER_MS = 10_000;

const FAILURES: Readonly<Record<string, readonly [OpenFailure, string]>> = {
  ECONNREFUSED: ['refused', 'Start the device server, or correct the port.'],
  ENOTFOUND: ['missing', 'Correct the host name, or see whether names are resolved.'],
  EAI_AGAIN: ['missing', 'See whether names are resolved on this gateway.'],
  EHOSTUNREACH: ['unreachable', 'See whether the device server is powered and cabled.'],
  ENETUNREACH: ['unreachable', 'See whether this gateway has a network.'],
  ETIMEDOUT: ['timeout', 'See whether the device server is powered and cabled.'],
};

export class TcpTransport implements Transport {
  readonly #host: string;
  readonly #port: number;
  #socket: Socket | null = null;
  #closed = false;

  constructor(host: string, port: number) {
    this.#host = host;
    this.#port = port;
  }

  open(handlers: TransportHandlers): Promise<void> {
    const where = `${this.#host}:${this.#port}`;
    return new Promise((resolve, reject) => {
      const buffer = Buffer.allocUnsafeSlow(READ_BUFFER_BYTES);
      let connected = false;
      const socket = connect({
        host: this.#host,
        port: this.#port,
        keepAlive: true,
        keepAliveInitialDelay: KEEPALIVE_AFTER_MS,
        onread: {
          buffer,
          callback: (length) => {
            if (!this.#closed) handlers.onBytes(buffer.subarray(0, length));
            return true;
          },
        },
      });
      this.#socket = socket;
      const gone = (error: unknown, why: string) => {
        if (!connected) {
          const [failure, fix] = FAILURES[codeOf(error)] ?? [
            'other',
            'See what the network says about this host.',
          ];
          reject(new OpenError(failure, why, fix, { cause: error }));
        } else if (!this.#closed) handlers.onClosed(why);
        void this.close();
      };
      socket.on('connect', () => {
        connected = true;
        resolve();
      });
      socket.on('error', (error) => gone(error, `${where}: ${textOf(error)}`));
      socket.on('end', () => gone(null, `${where} ended the connection`));
      socket.on('close', () => gone(null, `${where} was closed`));
    });
  }

  async close(): Promise<void> {
    this.#closed = true;
    this.#socket?.destroy();
    this.#socket = null;
  }
}
