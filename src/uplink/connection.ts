/**
 * One connection to the broker, from dialling to its end. It is never revived: the next one is a new object, so that
 * nothing late from an old one can be taken for news of the present one. MQTT.js is used without its queues and
 * without its reconnecting.
 */

import type { Socket } from 'node:net';
import type { Duplex } from 'node:stream';
import mqtt, { type IClientOptions, MqttClient } from 'mqtt';
import { ForebayError } from '../config/errors.ts';
import type { Meter } from './byte-ledger.ts';
import { type BrokerAddress, dial, explainDial, otherSideHungUp, type TlsFiles } from './dial.ts';
import { PacketGuard } from './packet-guard.ts';

export interface ConnectionSettings {
  readonly address: BrokerAddress;
  readonly tls: TlsFiles;
  readonly clientId: string;
  readonly username: string | null;
  readonly password: string | null;
  readonly protocol: 4 | 5;
  readonly keepaliveS: number;
  readonly connectTimeoutMs: number;
  /** Larger packets from the broker are cut short. */
  readonly maxInboundBytes: number;
  readonly will: { readonly topic: string; readonly payload: Buffer };
}

/** Why a connection ended. */
export interface End {
  readonly kind:
    | 'asked'
    /** CONNACK: the broker does not speak this version. */
    | 'version'
    /** The broker hung up before it answered CONNECT. */
    | 'closed-early'
    /** CONNACK: no. */
    | 'refused'
    /** It never came about: name, route, TLS, time. */
    | 'failed'
    /** The broker hung up, as far as one can tell: some routers reset a connection as a broker would. */
    | 'closed'
    /** The link failed; or we hung up: the broker did not answer in time, or sent what it must not. */
    | 'lost';
  readonly error: Error;
}

export interface ConnectionHost {
  up(connection: Connection): void;
  down(connection: Connection, end: End): void;
  message(topic: string, payload: Buffer, retained: boolean): void;
  /** A packet is larger than agreed; of a message only the beginning will come. */
  oversized(): void;
}

/** The broker answered a publish with a reason of 0x80 or more (MQTT 5, 3.4.2.1). */
export class PublishRefused extends Error {
  readonly reasonCode: number;

  constructor(reasonCode: number, message: string) {
    super(message);
    this.name = 'PublishRefused';
    this.reasonCode = reasonCode;
  }
}

const receiveMaximum = 20;
/** CONNACK codes for an unknown protocol version: 3.1.1, 3.2.2.3, and 5, 3.2.2.2. */
const versionCodes = [1, 132];

export class Connection {
  readonly protocol: 4 | 5;
  readonly #settings: ConnectionSettings;
  readonly #host: ConnectionHost;
  readonly #client: MqttClient;
  readonly #waiting = new Set<(error: Error) => void>();
  #raw: Socket | null = null;
  #isUp = false;
  #wasUp = false;
  #end: End | null = null;
  #error: Error | null = null;
  #asked = false;
  /** The broker said that it hangs up (MQTT 5, 3.14). */
  #dismissed = false;
  #sentPackets = 0;
  #receivedPackets = 0;
  #serverReceiveMaximum = 65_535;
  #serverMaxBytes: number | null = null;
  #ackReason = 0;

  constructor(settings: ConnectionSettings, host: ConnectionHost) {
    this.protocol = settings.protocol;
    this.#settings = settings;
    this.#host = host;
    const options = clientOptions(settings);
    this.#client = settings.address.websocket
      ? mqtt.connect(settings.address.href, {
          ...options,
          wsOptions: { createConnection: () => this.#dial() },
        } as IClientOptions)
      : new MqttClient(() => this.#watch(this.#dial()) as MqttClient['stream'], options);
    if (settings.address.websocket) this.#watch(this.#client.stream as unknown as Duplex);
    this.#listen();
  }

  get isUp(): boolean {
    return this.#isUp;
  }

  /** Counters for the ledger; they hold still once the connection has ended. */
  readonly meter: Meter = {
    sentBytes: () => this.#raw?.bytesWritten ?? 0,
    receivedBytes: () => this.#raw?.bytesRead ?? 0,
    sentPackets: () => this.#sentPackets,
    receivedPackets: () => this.#receivedPackets,
  };

  /** How many unacknowledged messages the broker takes. */
  get receiveMaximum(): number {
    return this.#serverReceiveMaximum;
  }

  /** The largest packet that the broker takes, where it said so. */
  get maxPacketBytes(): number | null {
    return this.#serverMaxBytes;
  }

  /**
   * QoS 1. Resolves at the acknowledgement, with its reason code; rejects with PublishRefused, or because the
   * connection ended.
   */
  async publish(topic: string, payload: Uint8Array, retain: boolean, timeoutMs: number): Promise<number> {
    let reason = 0;
    await this.#within(timeoutMs, `acknowledge ${topic}`, (done) => {
      this.#client.publish(topic, Buffer.from(payload), { qos: 1, retain }, (error) => {
        // MQTT.js calls back while it handles the acknowledgement, and keeps its reason to itself.
        reason = this.#ackReason;
        done(refusal(error));
      });
    });
    return reason;
  }

  /** Rejects where the broker denies one of them; the others hold. */
  subscribe(topics: readonly string[], timeoutMs: number): Promise<void> {
    return this.#within(timeoutMs, 'answer a subscription', (done) => {
      this.#client.subscribe([...topics], { qos: 1 }, (error) => done(refusal(error)));
    });
  }

  unsubscribe(topic: string, timeoutMs: number): Promise<void> {
    return this.#within(timeoutMs, 'answer an unsubscription', (done) => {
      this.#client.unsubscribe(topic, (error) => done(refusal(error)));
    });
  }

  /** Says goodbye, so that the will does not fire; hangs up when that takes longer than `withinMs`. */
  async goodbye(withinMs: number): Promise<void> {
    this.#asked = true;
    if (this.#end !== null) return;
    await new Promise<void>((resolve) => {
      const timer = setTimeout(resolve, withinMs);
      this.#client.once('close', () => {
        clearTimeout(timer);
        resolve();
      });
      this.#client.end(false);
    });
    this.#finish({ kind: 'asked', error: new Error('the agent hung up') });
  }

  /** Hangs up; the broker then publishes the will. */
  kill(reason: string): void {
    this.#finish({ kind: this.#wasUp ? 'lost' : 'failed', error: new Error(reason) });
  }

  #dial(): Duplex {
    const { raw, stream } = dial(this.#settings.address, this.#settings.tls);
    this.#raw = raw;
    return stream;
  }

  /** Puts the guard where the bytes come in: MQTT.js, which makes a WebSocket itself, reads behind it. */
  #watch(stream: Duplex): Duplex {
    const guard = new PacketGuard(this.#settings.maxInboundBytes, () => this.#host.oversized());
    const push = stream.push.bind(stream);
    stream.push = (chunk: Buffer | null) => {
      if (chunk === null) return push(null);
      const rest = guard.filter(chunk);
      if (rest !== null) return push(rest);
      this.kill('the broker sent a packet whose length makes no sense');
      return false;
    };
    stream.on('error', (error) => this.#noteError(error));
    return stream;
  }

  #noteError(error: Error): void {
    this.#error ??= error;
  }

  #listen(): void {
    const client = this.#client;
    client.on('packetsend', () => this.#sentPackets++);
    client.on('packetreceive', (packet) => {
      this.#receivedPackets++;
      if (packet.cmd === 'puback') this.#ackReason = packet.reasonCode ?? 0;
    });
    client.on('error', (error) => this.#failed(error));
    client.on('disconnect', (packet) => {
      this.#dismissed = true;
      this.#noteError(new Error(`the broker hung up with reason ${packet.reasonCode ?? 0}`));
      this.#closed();
    });
    client.on('connect', (packet) => {
      if (this.#end !== null) return;
      const { receiveMaximum: most, maximumPacketSize } = packet.properties ?? {};
      this.#serverReceiveMaximum = most ?? 65_535;
      this.#serverMaxBytes = maximumPacketSize ?? null;
      this.#isUp = true;
      this.#wasUp = true;
      this.#host.up(this);
    });
    client.on('message', (topic, payload, packet) => {
      if (this.#end === null) this.#host.message(topic, payload, packet.retain);
    });
    client.on('close', () => this.#closed());
  }

  #failed(error: Error): void {
    this.#noteError(error);
    const code: unknown = (error as { code?: unknown }).code;
    if (typeof code === 'number' && !this.#wasUp) {
      if (versionCodes.includes(code)) this.#finish({ kind: 'version', error });
      else this.#finish({ kind: 'refused', error: refused(code, error) });
    } else if (typeof code !== 'string') {
      // Of MQTT.js itself: no CONNACK in time, no answer to a ping, a packet that makes no sense.
      this.kill(error.message);
    }
  }

  #closed(): void {
    const error =
      this.#error === null
        ? new Error('the broker hung up')
        : explainDial(this.#error, this.#settings.address);
    const hungUp = this.#dismissed || otherSideHungUp(this.#error);
    if (this.#asked) this.#finish({ kind: 'asked', error });
    else if (this.#wasUp) this.#finish({ kind: hungUp ? 'closed' : 'lost', error });
    else
      this.#finish({ kind: hungUp && (this.#raw?.bytesWritten ?? 0) > 0 ? 'closed-early' : 'failed', error });
  }

  #finish(end: End): void {
    if (this.#end !== null) return;
    this.#end = end;
    this.#isUp = false;
    this.#client.end(true);
    this.#raw?.destroy();
    for (const fail of [...this.#waiting]) fail(end.error);
    this.#host.down(this, end);
  }

  /** MQTT.js may never call back once a link is gone, so every wait ends with the connection and with its time. */
  #within(
    timeoutMs: number,
    what: string,
    start: (done: (error: Error | null) => void) => void,
  ): Promise<void> {
    return new Promise((resolve, reject) => {
      if (!this.#isUp) {
        reject(new Error('not connected'));
        return;
      }
      const done = (error: Error | null) => {
        clearTimeout(timer);
        this.#waiting.delete(done);
        if (error === null) resolve();
        else reject(error);
      };
      const timer = setTimeout(
        () => this.kill(`the broker did not ${what} within ${timeoutMs / 1000} s`),
        timeoutMs,
      );
      this.#waiting.add(done);
      start(done);
    });
  }
}

function clientOptions(settings: ConnectionSettings): IClientOptions {
  return {
    protocolId: 'MQTT',
    protocolVersion: settings.protocol,
    clientId: settings.clientId,
    clean: true,
    keepalive: settings.keepaliveS,
    connectTimeout: settings.connectTimeoutMs,
    reconnectPeriod: 0,
    queueQoSZero: false,
    resubscribe: false,
    ...(settings.username === null ? {} : { username: settings.username }),
    ...(settings.password === null ? {} : { password: settings.password }),
    will: { ...settings.will, qos: 1, retain: true },
    ...(settings.protocol === 5
      ? { properties: { receiveMaximum, maximumPacketSize: settings.maxInboundBytes } }
      : {}),
  };
}

function refusal(error: Error | null | undefined): Error | null {
  if (error === null || error === undefined) return null;
  const code: unknown = (error as { code?: unknown }).code;
  return typeof code === 'number' ? new PublishRefused(code, error.message) : error;
}

function refused(code: number, error: Error): Error {
  return new ForebayError('uplink.refused', `the broker refused the connection: ${error.message} (${code})`, {
    cause: error,
  });
}
