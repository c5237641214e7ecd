/** An uplink with a store, and a subscriber that stands for the control room. */
import mqtt, { type IClientOptions, type MqttClient } from 'mqtt';
import type { Broker } from '../../src/config/station.ts';
import { localStore } from '../../src/store/local-store.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import type { Commit, MessageClass, Store } from '../../src/store/types.ts';
import { MessageIds } from '../../src/uplink/message-ids.ts';
import { outboxMessage } from '../../src/uplink/payload.ts';
import {
  Uplink,
  type UplinkCounters,
  type UplinkHost,
  type UplinkSettings,
  type UplinkTiming,
} from '../../src/uplink/uplink.ts';
import { sleep } from './proxy.ts';
import { roomyLimits } from './store.ts';

const fastTiming: UplinkTiming = {
  firstPauseMs: 20,
  longestPauseMs: 200,
  steadyMs: 1000,
  connectTimeoutMs: 2000,
  ackTimeoutMs: 1000,
  quotaPauseMs: 100,
  markerWaitMs: 300,
  bookEveryMs: 200,
  nextChanceMs: 3_600_000,
};

export function remoteBroker(
  port: number,
  changes: Partial<Extract<Broker, { kind: 'remote' }>> = {},
): Broker {
  return {
    kind: 'remote',
    url: `mqtt://127.0.0.1:${port}`,
    clientId: 'north-weir-gateway',
    protocol: null,
    username: null,
    passwordFile: null,
    caFile: null,
    certFile: null,
    keyFile: null,
    keepaliveS: 30,
    bytesPerDay: 1e9,
    snapshotBytesPerDay: 1e9,
    ...changes,
  };
}

export interface LogLine {
  level: string;
  message: string;
  details: Record<string, unknown>;
}

export class Rig {
  readonly uplink: Uplink;
  readonly store: Store;
  readonly ids: MessageIds;
  readonly lines: LogLine[] = [];
  readonly commands: [string, string][] = [];
  /** Those of them that the broker had kept. */
  readonly retainedCommands: string[] = [];
  /** Ids of the alarms that were committed. */
  readonly alarms: string[] = [];
  clock: 'synchronised' | 'free' = 'synchronised';

  private constructor(store: Store, ids: MessageIds, settings: UplinkSettings, counters?: UplinkCounters) {
    this.store = store;
    this.ids = ids;
    const host: UplinkHost = {
      store,
      ids,
      runS: () => performance.now() / 1000,
      now: () => new Date().toISOString(),
      agent: () => ({ version: '0.1.0', config: '0123456789ab', clock: this.clock, storage: 'ok' as const }),
      command: (topic, text, retained) => {
        this.commands.push([topic, text]);
        if (retained) this.retainedCommands.push(text);
      },
      log: (level, message, details) => this.lines.push({ level, message, details }),
    };
    this.uplink = new Uplink(settings, host, counters);
  }

  static async make(
    broker: Broker,
    changes: Partial<UplinkSettings> & { store?: Store; counters?: UplinkCounters } = {},
  ): Promise<Rig> {
    const {
      store = localStore(new MemoryStore(roomyLimits, () => performance.now() / 1000)),
      counters,
      ...rest
    } = changes;
    const { storeId, nextN } = await store.open();
    const settings: UplinkSettings = {
      site: 'north-weir',
      broker,
      asks: ['readings', 'acknowledge'],
      commandTopics: [],
      timing: fastTiming,
      ...rest,
    };
    return new Rig(store, new MessageIds(storeId, nextN), settings, counters);
  }

  async send(name: MessageClass, topic: string, body: Record<string, unknown> = {}): Promise<string> {
    const message = outboxMessage(this.ids, name, topic, { t: '2026-03-02T10:15:30.000Z', ...body });
    const commit: Commit = { outbox: [message] };
    await this.store.commit(commit);
    this.uplink.kick();
    const id = this.ids.idOf(message.n);
    if (name === 'alarm') this.alarms.push(id);
    return id;
  }

  /** An alarm of its own topic, or on one of `topics` that are used in turn. */
  async alarm(k: number, topics = Number.POSITIVE_INFINITY): Promise<string> {
    const subject = Number.isFinite(topics) ? k % topics : k;
    return await this.send('alarm', this.uplink.topics.alarm('pump-1', `p${subject}`, 'zone'), alarmBody(k));
  }

  async empty(withinMs = 10_000): Promise<void> {
    await until(
      async () => (await this.store.counters()).outbox.rows === 0,
      'the outbox to be empty',
      withinMs,
    );
  }

  async online(withinMs = 5000): Promise<void> {
    await until(() => this.uplink.status().connected, 'the uplink to be connected', withinMs);
  }

  said(pattern: RegExp): boolean {
    return this.lines.some((line) =>
      pattern.test(`${line.message} ${JSON.stringify(line.details)} ${String(line.details.err)}`),
    );
  }
}

function alarmBody(k: number): Record<string, unknown> {
  return {
    state: 'unacknowledged',
    level: 'danger',
    value: 7.1,
    limit: 6.6,
    unit: 'mm/s',
    raised: null,
    since: '2026-03-02T10:15:00.000Z',
    acknowledged_by: null,
    reason: `test ${k}`,
    check: 'nothing',
    snapshot: null,
  };
}

export interface Heard {
  topic: string;
  text: string;
  retained: boolean;
  id: string | null;
}

/** Subscribes to everything and comes back by itself. */
export class ControlRoom {
  readonly heard: Heard[] = [];
  readonly client: MqttClient;

  private constructor(client: MqttClient) {
    this.client = client;
    client.on('message', (topic, payload, packet) => {
      const text = payload.toString();
      let id: string | null = null;
      try {
        id = String((JSON.parse(text) as { id?: unknown }).id);
      } catch {
        // An emptied topic.
      }
      this.heard.push({ topic, text, retained: packet.retain, id });
    });
    client.on('connect', () => client.subscribe('forebay/#', { qos: 1 }));
  }

  static async join(port: number, options: IClientOptions = {}): Promise<ControlRoom> {
    const client = mqtt.connect(`mqtt://127.0.0.1:${port}`, {
      reconnectPeriod: 20,
      protocolVersion: 4,
      ...options,
    });
    const room = new ControlRoom(client);
    await new Promise<void>((resolve, reject) => {
      client.once('packetreceive', function waitForSuback(packet) {
        if (packet.cmd === 'suback') resolve();
        else client.once('packetreceive', waitForSuback);
      });
      setTimeout(() => reject(new Error('the subscriber did not connect')), 5000).unref();
    });
    return room;
  }

  /** Of a topic, in the order of arrival, repeats by id dropped. */
  ids(topic?: string): string[] {
    const heard = this.heard.filter((message) => topic === undefined || message.topic === topic);
    return [...new Set(heard.flatMap((message) => message.id ?? []))];
  }

  last(topic: string): Record<string, unknown> | null {
    const text = this.heard.findLast((message) => message.topic === topic)?.text;
    return text === undefined || text === '' ? null : (JSON.parse(text) as Record<string, unknown>);
  }

  async hears(ids: readonly string[], withinMs = 10_000): Promise<void> {
    await until(
      () => ids.every((id) => this.heard.some((m) => m.id === id)),
      `${ids.length} messages to arrive`,
      withinMs,
    );
  }

  async leave(): Promise<void> {
    await this.client.endAsync(true);
  }
}

export async function until(
  holds: () => boolean | Promise<boolean>,
  what: string,
  withinMs = 10_000,
): Promise<void> {
  const start = performance.now();
  while (!(await holds())) {
    if (performance.now() - start > withinMs) throw new Error(`waited ${withinMs} ms in vain for ${what}`);
    await sleep(10);
  }
}
