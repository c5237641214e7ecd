/** The way of `forebay pull` to the broker: it comes back by itself, each time as a fresh client. */

import { randomBytes } from 'node:crypto';
import mqtt, { type IClientOptions, type MqttClient } from 'mqtt';
import { ForebayError } from '../config/errors.ts';
import { parseBrokerUrl } from '../uplink/dial.ts';
import { readPem, readSecret } from '../uplink/secrets.ts';

export interface BrokerOptions {
  broker: string;
  username: string | null;
  passwordFile: string | null;
  caFile: string | null;
  certFile: string | null;
  keyFile: string | null;
  /** null: 5 is tried first, then 3.1.1. */
  protocol: 4 | 5 | null;
}

export interface LinkHost {
  message(topic: string, payload: Buffer): void;
  /** The connection is there again; what was subscribed to is subscribed to. */
  back(): void;
  lost(): void;
}

const CONNECT_MS = 15_000;
const RETRY_MS = 2000;
/** CONNACK codes for an unknown protocol version: 3.1.1, 3.2.2.3, and 5, 3.2.2.2. */
const VERSION_CODES = [1, 132];

export class PullLink {
  readonly #options: BrokerOptions;
  readonly #host: LinkHost;
  readonly #topics = new Set<string>();
  #client: MqttClient | null = null;
  #protocol: 4 | 5;
  #closed = false;

  private constructor(options: BrokerOptions, host: LinkHost) {
    this.#options = options;
    this.#host = host;
    this.#protocol = options.protocol ?? 5;
  }

  /** @throws ForebayError where the broker cannot be reached, or refuses. */
  static async connect(options: BrokerOptions, host: LinkHost): Promise<PullLink> {
    const link = new PullLink(options, host);
    await link.#connect();
    return link;
  }

  async subscribe(topic: string): Promise<void> {
    this.#topics.add(topic);
    await this.#client?.subscribeAsync(topic, { qos: 1 }).catch(() => undefined);
  }

  async unsubscribe(topic: string): Promise<void> {
    this.#topics.delete(topic);
    if (this.#client?.connected) await this.#client.unsubscribeAsync(topic).catch(() => undefined);
  }

  /** Lost where there is no connection: whoever waits for an answer asks again. */
  publish(topic: string, body: Readonly<Record<string, unknown>>): void {
    if (this.#client?.connected) this.#client.publish(topic, JSON.stringify(body), { qos: 1 });
  }

  async close(): Promise<void> {
    this.#closed = true;
    const client = this.#client;
    if (!client) return;
    const hard = setTimeout(() => client.end(true), 1000);
    await client.endAsync(false).catch(() => undefined);
    clearTimeout(hard);
  }

  async #connect(): Promise<void> {
    try {
      await this.#attempt();
    } catch (error) {
      const code = (error as { code?: unknown }).code;
      const fallBack = this.#options.protocol === null && this.#protocol === 5;
      if (!fallBack || typeof code !== 'number' || !VERSION_CODES.includes(code)) throw this.#explain(error);
      this.#protocol = 4;
      await this.#attempt().catch((again) => {
        throw this.#explain(again);
      });
    }
  }

  async #attempt(): Promise<void> {
    const client = await mqtt.connectAsync(
      parseBrokerUrl(this.#options.broker).href,
      this.#clientOptions(),
      false,
    );
    this.#client = client;
    client.on('message', (topic, payload) => this.#host.message(topic, payload));
    client.on('error', () => undefined);
    client.once('close', () => {
      if (this.#closed || this.#client !== client) return;
      client.end(true);
      this.#host.lost();
      void this.#comeBack();
    });
    for (const topic of this.#topics) await client.subscribeAsync(topic, { qos: 1 });
  }

  async #comeBack(): Promise<void> {
    while (!this.#closed) {
      await new Promise((resolve) => setTimeout(resolve, RETRY_MS));
      if (this.#closed) return;
      try {
        await this.#connect();
        this.#host.back();
        return;
      } catch {
        // Tried again until whoever pulls gives up.
      }
    }
  }

  #clientOptions(): IClientOptions {
    const { username, passwordFile, caFile, certFile, keyFile } = this.#options;
    return {
      clientId: `forebay-pull-${randomBytes(4).toString('hex')}`,
      protocolVersion: this.#protocol,
      clean: true,
      reconnectPeriod: 0,
      connectTimeout: CONNECT_MS,
      rejectUnauthorized: true,
      ...(username === null ? {} : { username }),
      ...(passwordFile === null ? {} : { password: readSecret(passwordFile).value }),
      ...(caFile === null ? {} : { ca: readPem(caFile, false).value }),
      ...(certFile === null ? {} : { cert: readPem(certFile, false).value }),
      ...(keyFile === null ? {} : { key: readPem(keyFile, true).value }),
    };
  }

  #explain(error: unknown): ForebayError {
    if (error instanceof ForebayError) return error;
    const { host, port } = parseBrokerUrl(this.#options.broker);
    const said =
      error instanceof Error ? error.message || String((error as NodeJS.ErrnoException).code) : String(error);
    return new ForebayError('uplink.unreachable', `no connection to the broker at ${host}:${port}: ${said}`, {
      cause: error,
    });
  }
}
