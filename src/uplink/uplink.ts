/**
 * The agent's way to the control room: connection, outbox, asks, commands and the byte budget, put together.
 *
 * At each connect: subscribe; see what the broker still holds; send the outbox; say `online`. At a stop: let what is
 * in flight be acknowledged, say `offline`, hang up; whatever the broker does not answer in time stays in the store.
 */

import type { Broker } from '../config/station.ts';
import type { BudgetLine, Store } from '../store/types.ts';
import { type AskCounters, AskDispatcher, type AskHandler, noAsks } from './asks.ts';
import { type Access, accessEmbedded, accessRemote } from './broker-access.ts';
import { ByteLedger } from './byte-ledger.ts';
import { Connection, type End, PublishRefused } from './connection.ts';
import { ConnectionLoop } from './connection-loop.ts';
import { EmbeddedBroker } from './embedded-broker.ts';
import type { MessageIds } from './message-ids.ts';
import { OutboxDrainer } from './outbox-drainer.ts';
import { PartSender, type PartTransfer } from './part-sender.ts';
import { encode, outboxMessage } from './payload.ts';
import type { AskVerb } from './payload-schemas.ts';
import { type AgentBlock, agentBlock, brokerKept } from './retained.ts';
import { type Topics, topicsOf } from './topics.ts';

export interface UplinkTiming {
  firstPauseMs: number;
  longestPauseMs: number;
  steadyMs: number;
  connectTimeoutMs: number;
  ackTimeoutMs: number;
  quotaPauseMs: number;
  /** How long the broker may take to hand out its retained `agent`. */
  markerWaitMs: number;
  /** What waits is looked at as often, too. */
  bookEveryMs: number;
  /** How long after a failed second chance the next one comes. */
  nextChanceMs: number;
}

export interface UplinkSettings {
  readonly site: string;
  readonly broker: Broker;
  /** Verbs that are enabled. */
  readonly asks: readonly string[];
  /** Topics that say whether a machine runs, or how fast. */
  readonly commandTopics: readonly string[];
  /** The largest packet that is sent where the broker names no limit of its own. */
  readonly maxPacketBytes?: number;
  readonly timing?: Partial<UplinkTiming>;
}

export interface UplinkHost {
  readonly store: Store;
  readonly ids: MessageIds;
  /** Seconds of run time, as the store counts it. */
  runS(): number;
  /** Wall time, ISO 8601 UTC. */
  now(): string;
  agent(): { version: string; config: string; clock: 'synchronised' | 'free'; storage: 'ok' | 'failing' };
  /** `retained`: told at any time before this connection; otherwise just now. */
  command(topic: string, text: string, retained: boolean): void;
  log(level: 'info' | 'warn' | 'error', message: string, details: Record<string, unknown>): void;
}

/** Since the start of the agent: an uplink that takes the place of another one counts on. */
export interface UplinkCounters {
  connects: number;
  asks: AskCounters;
  /** Packets from the broker that were larger than agreed. */
  oversized: number;
}

export interface UplinkStatus extends UplinkCounters {
  connected: boolean;
  protocol: '5' | '3.1.1' | null;
  inFlight: number;
  bytesToday: readonly BudgetLine[];
  leftTodayBytes: number;
}

const usualTiming: UplinkTiming = {
  firstPauseMs: 1000,
  longestPauseMs: 120_000,
  steadyMs: 60_000,
  connectTimeoutMs: 30_000,
  ackTimeoutMs: 10_000,
  quotaPauseMs: 5000,
  markerWaitMs: 3000,
  bookEveryMs: 60_000,
  nextChanceMs: 3_600_000,
};
const maxInFlight = 16;
const maxInboundBytes = 131_072;
const usualMaxPacketBytes = 256 * 1024;
const slowestBytesPerS = 1000;
const maxCommandBytes = 256;
const embeddedClients = 32;

export class Uplink {
  readonly topics: Topics;
  readonly counters: UplinkCounters;
  readonly #settings: UplinkSettings;
  readonly #host: UplinkHost;
  readonly #timing: UplinkTiming;
  readonly #ledger: ByteLedger;
  readonly #drainer: OutboxDrainer;
  readonly #parts: PartSender;
  readonly #asks: AskDispatcher;
  readonly #loop: ConnectionLoop;
  #embedded: EmbeddedBroker | null = null;
  #booking: NodeJS.Timeout | null = null;
  #block: AgentBlock | null = null;
  /** The block of the last connection that came about. */
  #lastBlock: AgentBlock | null = null;
  #marker: ((payload: Buffer) => void) | null = null;
  #stopping = false;
  readonly #warned = new Set<string>();

  constructor(
    settings: UplinkSettings,
    host: UplinkHost,
    counters: UplinkCounters = { connects: 0, asks: noAsks(), oversized: 0 },
  ) {
    this.#settings = settings;
    this.#host = host;
    this.counters = counters;
    this.#timing = { ...usualTiming, ...settings.timing };
    this.topics = topicsOf(settings.site);
    this.#ledger = new ByteLedger(settings.broker.bytesPerDay, settings.broker.snapshotBytesPerDay, () =>
      host.runS(),
    );
    this.#drainer = new OutboxDrainer(
      {
        store: host.store,
        allowedClasses: () => this.#ledger.allowedClasses(this.#parts.busy),
        published: (name, bytes) => this.#ledger.published(name, bytes),
        beside: () => ({ messages: this.#parts.inFlight, bytes: this.#parts.inFlightBytes }),
        settled: () => this.#parts.kick(),
        relieved: () => this.#loop.soon(),
        log: (...line) => host.log(...line),
      },
      {
        maxInFlight,
        maxPacketBytes: settings.maxPacketBytes ?? usualMaxPacketBytes,
        ackTimeoutMs: this.#timing.ackTimeoutMs,
        slowestBytesPerS,
        quotaPauseMs: this.#timing.quotaPauseMs,
        steadyMs: this.#timing.steadyMs,
        nextChanceMs: this.#timing.nextChanceMs,
      },
    );
    this.#parts = new PartSender(
      {
        topic: (askId, part) => this.topics.answerPart(askId, part),
        alarmUnderWay: () => this.#drainer.alarmInFlight,
        otherBytes: () => this.#drainer.inFlightBytes,
        roomFor: (connection) => connection.receiveMaximum - this.#drainer.inFlight - this.#parts.inFlight,
        leftTodayBytes: () => this.#ledger.waveformsLeftBytes(),
        published: (bytes) => this.#ledger.publishedPart(bytes),
        progressed: () => this.#drainer.kick(),
      },
      { ackTimeoutMs: this.#timing.ackTimeoutMs, slowestBytesPerS },
    );
    this.#asks = new AskDispatcher(
      settings.asks,
      {
        answer: (askId, body) => this.answer(askId, body),
        log: (...line) => host.log(...line),
        monotonicS: () => host.runS(),
      },
      counters.asks,
    );
    this.#loop = new ConnectionLoop(
      {
        protocol: settings.broker.kind === 'embedded' ? 4 : settings.broker.protocol,
        firstPauseMs: this.#timing.firstPauseMs,
        longestPauseMs: this.#timing.longestPauseMs,
        steadyMs: this.#timing.steadyMs,
        random: Math.random,
      },
      {
        connect: (protocol, up, down) => this.#connect(protocol, up, down),
        ended: (end, pauseMs) => this.#ended(end, pauseMs),
      },
    );
  }

  /** The port of the embedded broker; null: it is another's. */
  get embeddedPort(): number | null {
    return this.#embedded?.port ?? null;
  }

  /** Registers what answers a verb. */
  handle<V extends AskVerb>(verb: V, handler: AskHandler<V>): void {
    this.#asks.handle(verb, handler);
  }

  /** Sends binary parts of an answer; false: too many transfers are under way. */
  sendParts(transfer: PartTransfer): boolean {
    if (this.#parts.full) return false;
    this.#parts.add(transfer);
    return true;
  }

  /** Whether parts were being sent for that ask. */
  cancelParts(askId: string): boolean {
    return this.#parts.cancel(askId);
  }

  /** What waveforms may still cost today, and when that is renewed. */
  waveformBudget(): { leftBytes: number; renewsInS: number } {
    return { leftBytes: this.#ledger.waveformsLeftBytes(), renewsInS: this.#ledger.renewsInS() };
  }

  /** Throws where the embedded broker cannot open its port; a broker elsewhere is waited for. */
  async start(): Promise<void> {
    const { broker, commandTopics } = this.#settings;
    this.#ledger.restore(await this.#host.store.budget(this.#ledger.day));
    if (broker.kind === 'embedded') {
      this.#embedded = await EmbeddedBroker.open({
        port: broker.port,
        maxPacketBytes: this.#settings.maxPacketBytes ?? usualMaxPacketBytes,
        maxClients: embeddedClients,
        writable: (topic) => this.topics.verbOf(topic) !== null || commandTopics.includes(topic),
      });
    }
    this.#booking = setInterval(() => void this.#book(), this.#timing.bookEveryMs);
    this.#loop.start();
  }

  /** New rows are in the outbox. */
  kick(): void {
    this.#drainer.kick();
  }

  /** What `agent` says has changed: the clock, the configuration. */
  async agentChanged(): Promise<void> {
    const connection = this.#loop.connection;
    const block = this.#block;
    if (connection === null || block === null) return;
    // Out of numbers below the will's: a new connection brings a new block.
    if (block.used >= agentBlock - 1) connection.kill('the numbers of this connection are used up');
    else await this.#sayAgent(connection, block.first + block.used++, 'online').catch(() => undefined);
  }

  status(): UplinkStatus {
    const connection = this.#loop.connection;
    const protocol = connection?.protocol ?? null;
    return {
      connected: connection !== null,
      protocol: protocol === null ? null : protocol === 5 ? '5' : '3.1.1',
      ...structuredClone(this.counters),
      inFlight: this.#drainer.inFlight,
      bytesToday: this.#ledger.lines(),
      leftTodayBytes: this.#ledger.leftBytes(),
    };
  }

  async stop(withinMs: number): Promise<void> {
    this.#stopping = true;
    if (this.#booking !== null) clearInterval(this.#booking);
    const connection = this.#loop.stop();
    if (connection?.isUp === true && this.#block !== null) {
      const until = performance.now() + withinMs / 2;
      while (connection.isUp && this.#drainer.busy && performance.now() < until) await pause(10);
      // What comes from here on stays in the store: nothing follows the last word.
      const end: End = { kind: 'asked', error: new Error('the agent stops') };
      this.#parts.detach();
      await this.#drainer.detach(end);
      const n = this.#block.first + agentBlock - 1;
      await this.#sayAgent(connection, n, 'offline', withinMs / 4).catch(() => undefined);
      await connection.goodbye(withinMs / 4);
    } else connection?.kill('the agent stops');
    this.#parts.stop();
    await this.#book();
    await this.#embedded?.close();
  }

  async #connect(protocol: 4 | 5, up: () => void, down: (end: End) => void): Promise<Connection> {
    const access = this.#access();
    // Numbers of a block are on the disk before any of them is sent; an attempt that came to nothing leaves it unused.
    if (this.#block === null) {
      this.#block = { first: this.#host.ids.takeBlock(agentBlock), used: 0 };
      await this.#host.store.commit({ nextN: this.#host.ids.nextN });
    }
    const will = {
      topic: this.topics.agent,
      payload: this.#agentPayload(this.#block.first + agentBlock - 1, 'offline'),
    };
    const settings = {
      ...access,
      protocol,
      will,
      maxInboundBytes,
      connectTimeoutMs: this.#timing.connectTimeoutMs,
    };
    const connection = new Connection(settings, {
      up: () => {
        up();
        this.#greet(connection).catch((error: Error) => connection.kill(error.message));
      },
      down: (_, end) => {
        this.#ledger.follow(null);
        // First, for it asks what else was in flight.
        void this.#drainer.detach(end);
        this.#parts.detach();
        down(end);
      },
      message: (topic, payload, retained) => this.#message(topic, payload, retained),
      oversized: () => {
        this.counters.oversized++;
        this.#host.log('warn', 'the broker sent a packet larger than agreed; the surplus is dropped', {
          maxBytes: maxInboundBytes,
        });
      },
    });
    this.#ledger.follow(connection.meter);
    return connection;
  }

  #access(): Access {
    if (this.#embedded !== null) return accessEmbedded(this.#embedded);
    const broker = this.#settings.broker as Extract<Broker, { kind: 'remote' }>;
    return accessRemote(broker, (message) => {
      if (this.#warned.has(message)) return;
      this.#warned.add(message);
      this.#host.log('warn', message, {});
    });
  }

  async #greet(connection: Connection): Promise<void> {
    const block = this.#block!;
    const last = this.#lastBlock;
    this.#lastBlock = block;
    this.counters.connects++;
    this.#host.log('info', 'connected', { protocol: connection.protocol });
    // The first connection of a run knows of no earlier one: there is nothing to compare with, nor to wait for.
    const marker = last === null ? null : this.#readMarker();
    const own = marker === null ? [] : [this.topics.agent];
    await this.#subscribe(connection, [...own, this.topics.asks]);
    for (const topic of this.#settings.commandTopics) await this.#subscribe(connection, [topic]);
    await this.#host.store.releaseRefused();
    if (this.#stopping) return;
    this.#drainer.attach(connection);
    this.#parts.attach(connection);
    if (!brokerKept(await marker, this.#host.ids.storeId, last)) {
      await this.#host.store.resendRetained();
      this.#drainer.kick();
    }
    if (!connection.isUp || this.#stopping) return;
    await this.#sayAgent(connection, block.first + block.used++, 'online');
    for (const topic of own) await connection.unsubscribe(topic, this.#timing.ackTimeoutMs);
  }

  /** What the broker retains of `agent`; null: nothing, or not in time. */
  #readMarker(): Promise<Buffer | null> {
    return new Promise((resolve) => {
      const timer = setTimeout(() => resolve(null), this.#timing.markerWaitMs);
      this.#marker = (payload) => {
        clearTimeout(timer);
        resolve(payload);
      };
    });
  }

  async #subscribe(connection: Connection, topics: readonly string[]): Promise<void> {
    try {
      await connection.subscribe(topics, this.#timing.ackTimeoutMs);
    } catch (error) {
      if (!(error instanceof PublishRefused)) throw error;
      this.#host.log('warn', 'the broker denies a subscription', { topics, reason: error.message });
    }
  }

  async #sayAgent(
    connection: Connection,
    n: number,
    state: 'online' | 'offline',
    timeoutMs?: number,
  ): Promise<void> {
    const payload = this.#agentPayload(n, state);
    this.#ledger.published('state', this.topics.agent.length + payload.byteLength);
    try {
      await connection.publish(this.topics.agent, payload, true, timeoutMs ?? this.#timing.ackTimeoutMs);
    } catch (error) {
      if (!(error instanceof PublishRefused)) throw error;
      this.#host.log('error', 'the broker denies the agent its own topic', { reason: error.message });
    }
  }

  #agentPayload(n: number, state: 'online' | 'offline'): Buffer {
    return encode(this.#host.ids.idOf(n), { state, t: this.#host.now(), ...this.#host.agent() });
  }

  /** A throw here would stop all further messages without a word. */
  #message(topic: string, payload: Buffer, retained: boolean): void {
    try {
      const verb = this.topics.verbOf(topic);
      if (verb !== null) void this.#asks.take(verb, payload, retained);
      else if (topic === this.topics.agent) {
        if (retained) this.#marker?.(payload);
      } else if (payload.byteLength <= maxCommandBytes)
        this.#host.command(topic, payload.toString('utf8'), retained);
    } catch (error) {
      this.#host.log('error', 'a message from the broker failed', { topic, err: error });
    }
  }

  /** Puts an answer into the outbox; also a further one, where an ask that was answered fails later. */
  async answer(askId: string, body: Readonly<Record<string, unknown>>): Promise<void> {
    const { ids, store } = this.#host;
    await store.commit({ outbox: [outboxMessage(ids, 'answer', this.topics.answer(askId), body)] });
    this.kick();
  }

  #ended(end: End, pauseMs: number): void {
    // A block of a connection that came about is spent: its will may have been published.
    if (this.#lastBlock === this.#block) this.#block = null;
    const level = end.kind === 'version' ? 'info' : 'warn';
    this.#host.log(level, 'no connection to the broker', { kind: end.kind, err: end.error, pauseMs });
  }

  /** Puts the books into the store, and sends what a new day allows. */
  async #book(): Promise<void> {
    try {
      await this.#host.store.commit({ budget: this.#ledger.lines() });
    } catch (error) {
      this.#host.log('warn', 'the byte budget could not be written', { err: error });
    }
    this.kick();
  }
}

function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms));
}
