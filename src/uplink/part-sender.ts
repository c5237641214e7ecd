/**
 * Sends the parts of waveforms that somebody asked for, on `answer/<ask>/<n>`. They do not pass through the outbox:
 * they are on the disk already, and whoever asked asks again for what did not arrive.
 *
 * Few are in flight, so that an alarm never waits behind many, and none is begun while an alarm is on its way.
 * Readings wait for them. Several transfers take turns. A transfer ends when its parts are acknowledged, when it is
 * cancelled, when the day's budget is spent, or when nobody listens: a broker of MQTT 5 says so in its acknowledgement
 * (PUBACK 0x10, no matching subscribers); one of 3.1.1 cannot, so there an ask is good for a bounded number of parts.
 */

import { type Connection, PublishRefused } from './connection.ts';

export interface PartTransfer {
  readonly askId: string;
  /** Numbers of the parts to send, in this order. */
  readonly parts: readonly number[];
  read(part: number): Promise<Buffer>;
  /** null: all parts are acknowledged. */
  ended(trouble: TransferTrouble | null): void;
}

export interface TransferTrouble {
  readonly kind: 'cancelled' | 'nobody-listens' | 'budget' | 'failed';
  readonly reason: string;
}

export interface PartHost {
  topic(askId: string, part: number): string;
  /** An alarm is on its way and not yet acknowledged. */
  alarmUnderWay(): boolean;
  /** Bytes in flight beside the parts: they lengthen the wait for an acknowledgement. */
  otherBytes(): number;
  /** Messages that the broker would still take. */
  roomFor(connection: Connection): number;
  leftTodayBytes(): number;
  published(bytes: number): void;
  /** A part was acknowledged or a transfer ended. */
  progressed(): void;
}

export interface PartSettings {
  readonly ackTimeoutMs: number;
  readonly slowestBytesPerS: number;
}

/** At 5 kB/s an alarm then waits three seconds at most for what is before it. */
const MAX_IN_FLIGHT = 2;
const MAX_TRANSFERS = 4;
/** Parts of one transfer that the broker may refuse for the moment before it is given up. */
const MAX_REFUSALS = 5;
const NO_MATCHING_SUBSCRIBERS = 0x10;
const RETRY_MS = 1000;

interface Running {
  readonly transfer: PartTransfer;
  readonly waiting: number[];
  inFlight: number;
  refusals: number;
}

export class PartSender {
  readonly #host: PartHost;
  readonly #settings: PartSettings;
  readonly #running: Running[] = [];
  #connection: Connection | null = null;
  #inFlight = new Map<object, number>();
  #retry: NodeJS.Timeout | null = null;

  constructor(host: PartHost, settings: PartSettings) {
    this.#host = host;
    this.#settings = settings;
  }

  /** There is something to send: what can wait should. */
  get busy(): boolean {
    return this.#running.length > 0;
  }

  get inFlight(): number {
    return this.#inFlight.size;
  }

  get inFlightBytes(): number {
    return [...this.#inFlight.values()].reduce((sum, bytes) => sum + bytes, 0);
  }

  /** Whether there is room for another transfer. */
  get full(): boolean {
    return this.#running.length >= MAX_TRANSFERS;
  }

  add(transfer: PartTransfer): void {
    this.#running.push({ transfer, waiting: [...transfer.parts], inFlight: 0, refusals: 0 });
    this.kick();
  }

  /** Whether there was such a transfer. */
  cancel(askId: string): boolean {
    const found = this.#running.find(({ transfer }) => transfer.askId === askId);
    if (found) this.#end(found, { kind: 'cancelled', reason: 'cancelled by whoever asked' });
    return found !== undefined;
  }

  attach(connection: Connection): void {
    this.#connection = connection;
    this.#inFlight = new Map();
    this.kick();
  }

  /** What was in flight goes out again with the next connection. */
  detach(): void {
    this.#connection = null;
    this.#inFlight = new Map();
    if (this.#retry !== null) clearTimeout(this.#retry);
    this.#retry = null;
  }

  /** Nothing more is sent. */
  stop(): void {
    this.detach();
    for (const running of [...this.#running]) this.#end(running, { kind: 'cancelled', reason: 'stopped' });
  }

  kick(): void {
    const connection = this.#connection;
    if (connection === null || this.#retry !== null) return;
    while (this.#running.length > 0 && this.#inFlight.size < MAX_IN_FLIGHT) {
      if (this.#host.alarmUnderWay() || this.#host.roomFor(connection) <= 0) return;
      const next = this.#nextInTurn();
      if (next === null) return;
      if (this.#host.leftTodayBytes() <= 0) {
        this.#end(next, { kind: 'budget', reason: 'the daily budget for waveforms is spent' });
        continue;
      }
      void this.#send(next, next.waiting.shift()!, connection);
    }
  }

  /** Of the transfers that have parts left, the one that has waited longest. */
  #nextInTurn(): Running | null {
    const at = this.#running.findIndex(({ waiting }) => waiting.length > 0);
    if (at < 0) return null;
    const [running] = this.#running.splice(at, 1);
    this.#running.push(running!);
    return running!;
  }

  async #send(running: Running, part: number, connection: Connection): Promise<void> {
    const { transfer } = running;
    const flight = this.#inFlight;
    const token = {};
    flight.set(token, 0);
    running.inFlight++;
    try {
      const bytes = await transfer.read(part);
      if (!this.#running.includes(running)) return;
      if (this.#connection !== connection) {
        running.waiting.unshift(part);
        return;
      }
      flight.set(token, bytes.length);
      const before = this.inFlightBytes + this.#host.otherBytes();
      const timeoutMs = this.#settings.ackTimeoutMs + (before / this.#settings.slowestBytesPerS) * 1000;
      this.#host.published(bytes.length);
      const reason = await connection.publish(
        this.#host.topic(transfer.askId, part),
        bytes,
        false,
        timeoutMs,
      );
      if (reason === NO_MATCHING_SUBSCRIBERS)
        this.#end(running, { kind: 'nobody-listens', reason: 'nobody listens any more' });
    } catch (error) {
      this.#failed(running, part, error as Error, this.#connection === connection);
    } finally {
      flight.delete(token);
      running.inFlight--;
      if (running.waiting.length === 0 && running.inFlight === 0) this.#end(running, null);
      this.#host.progressed();
      this.kick();
    }
  }

  #failed(running: Running, part: number, error: Error, connected: boolean): void {
    if (!connected) running.waiting.unshift(part);
    else if (error instanceof PublishRefused && ++running.refusals < MAX_REFUSALS) {
      running.waiting.unshift(part);
      this.#retry ??= setTimeout(() => {
        this.#retry = null;
        this.kick();
      }, RETRY_MS);
    } else if (this.#connection !== null && !this.#connection.isUp) running.waiting.unshift(part);
    else this.#end(running, { kind: 'failed', reason: error.message });
  }

  #end(running: Running, trouble: TransferTrouble | null): void {
    const at = this.#running.indexOf(running);
    if (at < 0) return;
    this.#running.splice(at, 1);
    running.transfer.ended(trouble);
    this.#host.progressed();
  }
}
