/**
 * Carries rows from the outbox to the broker. A row stays in the store until the broker acknowledged it; at most one
 * message a topic is in flight, so that a resend never puts an older state back. What would make the broker hang up
 * is set aside before it is sent; a row that was in flight whenever the broker hung up is sent alone, and set aside
 * when that goes on. A link that is reset looks the same, so an alarm that was set aside for it is sent again, alone,
 * once a connection has held and nothing else waits.
 */

import {
  hungUpReason,
  type MessageClass,
  type OutboxRow,
  refusedReason,
  type Store,
} from '../store/types.ts';
import { type Connection, type End, PublishRefused } from './connection.ts';
import { topicTrouble } from './topics.ts';

export interface DrainerHost {
  readonly store: Pick<Store, 'batch' | 'accept' | 'reject' | 'releaseHungUp'>;
  allowedClasses(): readonly MessageClass[];
  published(name: MessageClass, packetBytes: number): void;
  /** What else is in flight on this connection. */
  beside(): { messages: number; bytes: number };
  /** A message is no longer in flight. */
  settled(): void;
  /** The message over which the broker hung up is set aside. */
  relieved(): void;
  log(level: 'warn' | 'error', message: string, details: Record<string, unknown>): void;
}

export interface DrainerSettings {
  readonly maxInFlight: number;
  readonly maxPacketBytes: number;
  readonly ackTimeoutMs: number;
  /** The slowest link that is served: bytes in flight lengthen the wait by this. */
  readonly slowestBytesPerS: number;
  /** Pause after the broker said that it has no room. */
  readonly quotaPauseMs: number;
  /** A connection that held so long is good enough for what was set aside because the broker hung up. */
  readonly steadyMs: number;
  /** Where even that one hung up over it, the next chance comes so much later. */
  readonly nextChanceMs: number;
}

/** A row that was in flight so often when the broker hung up is sent alone; after `poisonTries` it is set aside. */
const suspectTries = 3;
const poisonTries = 8;
/** PUBACK 0x83 implementation specific error, 0x97 quota exceeded: the message may pass later (MQTT 5, 3.4.2.1). */
const laterCodes = [0x83, 0x97];

interface InFlight {
  row: OutboxRow;
  bytes: number;
}

export class OutboxDrainer {
  readonly #host: DrainerHost;
  readonly #settings: DrainerSettings;
  #connection: Connection | null = null;
  #inFlight = new Map<string, InFlight>();
  #filling = false;
  #again = false;
  #pause: NodeJS.Timeout | null = null;
  #attachedMs = 0;
  /** There may be alarms that were set aside because the broker hung up; from before this start, too. */
  #anyHungUp = true;
  #chanceFailedMs = Number.NEGATIVE_INFINITY;

  constructor(host: DrainerHost, settings: DrainerSettings) {
    this.#host = host;
    this.#settings = settings;
  }

  get inFlight(): number {
    return this.#inFlight.size;
  }

  /** Something is in flight, or about to be. */
  get busy(): boolean {
    return this.#filling || this.#inFlight.size > 0;
  }

  /** Bytes that are not acknowledged yet. */
  get inFlightBytes(): number {
    return [...this.#inFlight.values()].reduce((sum, { bytes }) => sum + bytes, 0);
  }

  get alarmInFlight(): boolean {
    return [...this.#inFlight.values()].some(({ row }) => row.class === 'alarm');
  }

  attach(connection: Connection): void {
    this.#connection = connection;
    this.#attachedMs = performance.now();
    this.#inFlight = new Map();
    this.kick();
  }

  /** The connection ended. Rows in flight stay in the store; where the broker hung up, it may have been for one of them. */
  async detach(end: End): Promise<void> {
    const flight = [...this.#inFlight.values()];
    const alone = flight.length === 1 && this.#host.beside().messages === 0;
    this.#connection = null;
    this.#inFlight = new Map();
    if (this.#pause !== null) clearTimeout(this.#pause);
    this.#pause = null;
    if (end.kind !== 'closed') return;
    for (const { row } of flight) {
      const poison = alone && row.tries + 1 >= poisonTries;
      const done = await this.#reject(row, `${hungUpReason} ${row.tries + 1} times over it`, poison);
      if (!poison || !done) continue;
      this.#anyHungUp = true;
      if (row.tries >= poisonTries) this.#chanceFailedMs = performance.now();
      this.#host.relieved();
    }
  }

  /** There may be something to send. */
  kick(): void {
    this.#again = true;
    if (!this.#filling) void this.#fill();
  }

  async #fill(): Promise<void> {
    this.#filling = true;
    try {
      while (this.#again) {
        this.#again = false;
        await this.#fillOnce();
      }
    } catch (error) {
      this.#host.log('error', 'the outbox cannot be read', { err: error });
    } finally {
      this.#filling = false;
    }
  }

  async #fillOnce(): Promise<void> {
    const connection = this.#connection;
    const flight = this.#inFlight;
    if (connection === null || this.#pause !== null) return;
    const room = connection.receiveMaximum - this.#host.beside().messages;
    const free = Math.min(this.#settings.maxInFlight, room) - flight.size;
    if (free <= 0 || this.#suspectAlone()) return;
    const rows = await this.#host.store.batch({
      max: free,
      busyTopics: [...flight.keys()],
      classes: this.#host.allowedClasses(),
    });
    if (this.#connection !== connection) return;
    if (rows.length === 0 && flight.size === 0) await this.#giveChance();
    for (const row of rows) {
      const trouble = this.#troubleWith(row, connection);
      if (trouble !== null) {
        // Where the store cannot note it, the row would come back at once.
        if (await this.#reject(row, trouble, true)) this.#again = true;
        else this.#rest();
      } else if (row.tries < suspectTries) void this.#send(row, connection);
      else if (flight.size === 0) {
        void this.#send(row, connection);
        return;
      }
      if (this.#connection !== connection || this.#suspectAlone()) return;
    }
  }

  /** What it releases has been tried so often that each goes alone, and back at once when the broker hangs up. */
  async #giveChance(): Promise<void> {
    const nowMs = performance.now();
    if (!this.#anyHungUp || nowMs - this.#attachedMs < this.#settings.steadyMs) return;
    if (nowMs - this.#chanceFailedMs < this.#settings.nextChanceMs) return;
    this.#anyHungUp = false;
    try {
      if ((await this.#host.store.releaseHungUp()) > 0) this.#again = true;
    } catch (error) {
      this.#anyHungUp = true;
      throw error;
    }
  }

  #suspectAlone(): boolean {
    const [only] = this.#inFlight.values();
    return only !== undefined && only.row.tries >= suspectTries;
  }

  #troubleWith(row: OutboxRow, connection: Connection): string | null {
    const trouble = topicTrouble(row.topic);
    if (trouble !== null) return trouble;
    const most = Math.min(
      this.#settings.maxPacketBytes,
      connection.maxPacketBytes ?? Number.POSITIVE_INFINITY,
    );
    const bytes = packetBytes(row);
    return bytes > most ? `${bytes} bytes are more than the ${most} that may be sent` : null;
  }

  async #send(row: OutboxRow, connection: Connection): Promise<void> {
    const flight = this.#inFlight;
    const bytes = packetBytes(row);
    flight.set(row.topic, { row, bytes });
    const waiting = this.inFlightBytes + this.#host.beside().bytes;
    const timeoutMs = this.#settings.ackTimeoutMs + (waiting / this.#settings.slowestBytesPerS) * 1000;
    try {
      this.#host.published(row.class, bytes);
      await connection.publish(row.topic, row.payload, row.retain, timeoutMs);
      await this.#host.store.accept([row.n]);
    } catch (error) {
      if (this.#connection !== connection) return;
      if (!(error instanceof PublishRefused)) {
        // The store failed, or the connection is about to report its end: the row stays, and goes out again.
        this.#host.log('warn', 'a message stays in the outbox', { topic: row.topic, err: error });
        this.#rest();
      } else if (laterCodes.includes(error.reasonCode)) this.#rest();
      else
        await this.#reject(
          row,
          `${refusedReason} by the broker: ${error.message} (${error.reasonCode})`,
          true,
        );
    } finally {
      flight.delete(row.topic);
      this.#host.settled();
      if (this.#connection === connection) this.kick();
    }
  }

  #rest(): void {
    this.#pause ??= setTimeout(() => {
      this.#pause = null;
      this.kick();
    }, this.#settings.quotaPauseMs);
  }

  async #reject(row: OutboxRow, reason: string, poison: boolean): Promise<boolean> {
    if (poison) this.#host.log('error', 'a message is set aside', { n: row.n, topic: row.topic, reason });
    try {
      await this.#host.store.reject(row.n, reason, { poison });
      return true;
    } catch (error) {
      this.#host.log('error', 'a message could not be set aside', { n: row.n, err: error });
      return false;
    }
  }
}

/** Fixed header at most 5, topic length 2, packet identifier 2, no properties 1 (MQTT 5, 3.3). */
function packetBytes(row: OutboxRow): number {
  return Buffer.byteLength(row.topic) + row.payload.byteLength + 10;
}
