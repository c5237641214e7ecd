/**
 * A station to break: the agent as a process, a real broker behind a proxy, two sensor nodes on pseudo-terminals, and
 * a control room that asks and takes note. What must arrive is known from a ledger inside the agent's own database: a
 * trigger of this test writes down each alarm message in the transaction that makes it.
 */
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import SqliteDatabase from 'better-sqlite3';
import mqtt, { type MqttClient } from 'mqtt';
import { AgentProcess } from './agent.ts';
import { until } from './broker-rig.ts';
import { Mosquitto } from './mosquitto.ts';
import { FaultyLink } from './proxy.ts';
import { Cable, nodeRateHz, pacedNode } from './replug.ts';
import type { PacedSender } from './sender.ts';

const site = 'test-weir';
/** Records start every second. */
const stepSamples = nodeRateHz;
export const pointKeys = ['m1/p', 'm2/p', 'm3/p', 'm4/p'] as const;
const places = [
  ['m1', 'node-1', 'x'],
  ['m2', 'node-1', 'y'],
  ['m3', 'node-2', 'x'],
  ['m4', 'node-2', 'y'],
] as const;

export interface StationChanges {
  broker?: string;
  storage?: string;
  /** The third link is one that only comes and goes by the configuration. */
  moreLinks?: string;
  /** Limit of the rule. */
  alertMmS?: number;
  everyS?: number;
}

export function stationText(brokerPort: number, changes: StationChanges = {}): string {
  const broker =
    changes.broker ??
    `{url: "mqtt://127.0.0.1:${brokerPort}", client_id: test-weir-gateway, keepalive_s: 10, bytes_per_day: 1000000000}`;
  const machines = places.map(
    ([id, link, channel]) => `  - id: ${id}
    running: {above_mm_s: 0.1}
    start_delay_s: 0
    points: [{id: p, link: ${link}, channel: ${channel}}]
`,
  );
  return `
site: {id: ${site}, name: Test weir, mains_hz: 50}
broker: ${broker}
storage: ${changes.storage ?? '{directory: FOLDER/state}'}
publish: {change_pct: 0, min_interval_s: 0, at_least_s: 1}
measure:
  every_s: ${changes.everyS ?? 1}
  velocity: {fmax_hz: 200, lines: 100, averages: 1}
  bands: []
  envelope: {band_hz: [500, 1500], fmax_hz: 200, lines: 100, averages: 1}
links:
  - id: node-1
    serial: {path: FOLDER/tty-1, baud: 3000000}
    expect: {node: 1, serial_number: A1, sample_rate_hz: ${nodeRateHz}, channels: [x, y]}
  - id: node-2
    serial: {path: FOLDER/tty-2, baud: 3000000}
    expect: {node: 2, serial_number: A2, sample_rate_hz: ${nodeRateHz}, channels: [x, y]}
${changes.moreLinks ?? ''}machines:
${machines.join('')}alarms:
  - {id: high, watch: velocity.overall, above: {alert: ${changes.alertMmS ?? 5}}, on_delay_s: 0, off_delay_s: 0}
asks: [readings, acknowledge, shelve, unshelve, test, note, journal]
`;
}

/** What came of the alarms: `sent` were committed to be published, in order by number within a topic. */
export interface Alarms {
  sent: number;
  received: number;
  lost: number;
  disordered: number;
}

/** The subscriber: keeps numbers, not payloads, so that it can listen for hours. */
class Listener {
  readonly client: MqttClient;
  /** By topic, ids in the order in which each was first heard. */
  readonly alarms = new Map<string, string[]>();
  readonly #seen = new Set<string>();
  /** By point: good readings, and records that their samples make up. */
  readonly readings = new Map<string, Records>();
  /** Monotonic ms of the last good and the last figureless reading by point. */
  readonly goodMs = new Map<string, number>();
  readonly blankMs = new Map<string, number>();
  /** The newest payload by topic, of everything but readings. */
  readonly latest = new Map<string, Record<string, unknown>>();
  /** All text heard, where it is wanted. */
  text: string | null = null;
  repeats = 0;

  constructor(port: number) {
    this.client = mqtt.connect(`mqtt://127.0.0.1:${port}`, {
      reconnectPeriod: 20,
      protocolVersion: 4,
      clientId: 'control-room',
      clean: false,
    });
    this.client.on('connect', () => this.client.subscribe('forebay/#', { qos: 1 }));
    this.client.on('error', () => undefined);
    this.client.on('message', (topic, payload) => this.#take(topic, payload));
  }

  #take(topic: string, payload: Buffer): void {
    if (this.text !== null) this.text += `${topic} ${payload}\n`;
    if (payload.length === 0) return;
    const body = JSON.parse(String(payload)) as Record<string, unknown> & { id: string };
    const name = topic.slice(`forebay/${site}/`.length);
    if (/\/alarm\//.test(name)) {
      if (this.#seen.has(body.id)) this.repeats++;
      else {
        this.#seen.add(body.id);
        const ids = this.alarms.get(topic) ?? [];
        ids.push(body.id);
        this.alarms.set(topic, ids);
      }
    }
    if (name.endsWith('/reading')) this.#reading(name.slice(0, -'/reading'.length), body);
    else this.latest.set(name, body);
  }

  #reading(point: string, body: Record<string, unknown> & { id: string }): void {
    const records = this.readings.get(point) ?? new Records();
    this.readings.set(point, records);
    if (!records.isNew(body.id)) return;
    const { overall } = body.velocity as { overall: number | null };
    if (overall === null) this.blankMs.set(point, performance.now());
    else {
      this.goodMs.set(point, performance.now());
      records.take(body.first_index as number);
    }
  }
}

/** Which records of a point's samples came to a reading; the index begins anew where the node does. */
class Records {
  good = 0;
  expected = 0;
  #last: number | null = null;
  #store = '';
  #n = 0;

  isNew(id: string): boolean {
    const [store = '', digits] = id.split('-');
    const n = Number(digits);
    if (store === this.#store && n <= this.#n) return false;
    this.#store = store;
    this.#n = n;
    return true;
  }

  take(firstIndex: number): void {
    const steps = this.#last === null ? 1 : (firstIndex - this.#last) / stepSamples;
    this.good++;
    this.expected += steps > 0 ? steps : 1;
    this.#last = firstIndex;
  }
}

export class FaultStation {
  readonly agent: AgentProcess;
  readonly broker: Mosquitto;
  readonly link: FaultyLink;
  readonly cables: readonly [Cable, Cable];
  readonly nodes: readonly [PacedSender, PacedSender];
  readonly room: Listener;
  /** Where the database is. */
  directory: string;
  #asks = 0;
  #pastLedger: string[] = [];
  readonly #undo: (() => void)[] = [];

  private constructor(agent: AgentProcess, broker: Mosquitto, link: FaultyLink, room: Listener) {
    this.agent = agent;
    this.broker = broker;
    this.link = link;
    this.room = room;
    this.directory = join(agent.folder, 'state');
    this.cables = [new Cable(`${agent.folder}/tty-1`), new Cable(`${agent.folder}/tty-2`)];
    this.nodes = [pacedNode(1, 'A1', this.cables[0]), pacedNode(2, 'A2', this.cables[1])];
  }

  /** @param brokerLines the listener's settings, as for Mosquitto.start. */
  static async start(
    options: {
      brokerLines?: string[];
      brokerFiles?: Record<string, string>;
      station?: StationChanges;
      prepare?: (station: FaultStation) => void;
    } = {},
  ): Promise<FaultStation> {
    const broker = await Mosquitto.start(
      options.brokerLines ?? ['allow_anonymous true', 'max_queued_messages 0'],
      options.brokerFiles,
    );
    const link = await FaultyLink.start(broker.port);
    const text = stationText(link.port, options.station);
    const agent = new AgentProcess(text.replace('127.0.0.1:PORT', `127.0.0.1:${link.port}`));
    const station = new FaultStation(agent, broker, link, new Listener(broker.port));
    try {
      await station.#begin(options.prepare);
    } catch (error) {
      // An agent left behind would go on opening its devices, whose numbers soon belong to another station.
      await station.stop();
      throw error;
    }
    return station;
  }

  async #begin(prepare: ((station: FaultStation) => void) | undefined): Promise<void> {
    await until(() => this.room.client.connected, 'the control room to connect');
    prepare?.(this);
    await this.#makeLedger();
    for (const cable of this.cables) await cable.plug();
    await this.agent.start();
    for (const node of this.nodes) node.start();
    await this.flows();
  }

  /** The database is made by the agent itself, which is stopped again for the ledger to be added. */
  async #makeLedger(): Promise<void> {
    mkdirSync(this.directory, { recursive: true });
    await this.agent.start();
    await this.agent.stop();
    this.addLedger();
  }

  addLedger(): void {
    const db = this.#open();
    db.exec(`
      CREATE TABLE IF NOT EXISTS test_ledger (n INTEGER PRIMARY KEY, topic TEXT NOT NULL);
      CREATE TRIGGER IF NOT EXISTS test_note AFTER INSERT ON outbox WHEN NEW.class = 0 AND length(NEW.payload) > 0
      BEGIN INSERT OR IGNORE INTO test_ledger VALUES (NEW.n, NEW.topic); END;`);
    db.close();
  }

  #open() {
    return new SqliteDatabase(join(this.directory, 'forebay.db'), { timeout: 5000 });
  }

  /** Ids of all alarm messages that were ever made. */
  ledger(): string[] {
    const db = this.#open();
    try {
      const sql =
        "SELECT (SELECT value FROM meta WHERE key = 'store') || '-' || n FROM test_ledger ORDER BY n";
      return [...this.#pastLedger, ...(db.prepare(sql).pluck().all() as string[])];
    } finally {
      db.close();
    }
  }

  /** State of an alarm by the newest entry of the journal, which no flood limit holds back; null: none. */
  journalState(key: string): string | null {
    const db = this.#open();
    try {
      const sql = "SELECT json FROM journal WHERE kind = 'alarm' AND key = ? ORDER BY n DESC LIMIT 1";
      const json = db.prepare(sql).pluck().get(key) as string | undefined;
      return json === undefined ? null : (JSON.parse(json) as { state: string }).state;
    } finally {
      db.close();
    }
  }

  /** To be called before the database is broken. */
  keepLedger(): void {
    this.#pastLedger = this.ledger();
  }

  /** Of what is laid out for one fault only; undone at the stop. */
  onStop(undo: () => void): void {
    this.#undo.push(undo);
  }

  moreCable(name: string): Cable {
    return new Cable(join(this.agent.folder, name));
  }

  /** Writes the station file anew and tells the agent. */
  reload(text: string): void {
    this.agent.configure(text);
    this.agent.signal('SIGHUP');
  }

  /** How often the log says so. */
  count(message: string): number {
    return this.agent.log.filter(({ msg }) => msg === message).length;
  }

  get clockFile(): string {
    return join(this.agent.folder, 'clock');
  }

  /** Where the agent's wall clock stands, as libfaketime reads it. */
  setClock(offset: string): void {
    writeFileSync(this.clockFile, `${offset}\n`);
  }

  askFor(verb: string): void {
    const id = `ask-${process.pid}-${this.#asks++}`;
    this.room.client.publish(`forebay/${site}/ask/${verb}`, JSON.stringify({ id }), { qos: 1 });
  }

  /** Alarm load until the returned function is called: somewhat more asks than are served for long. */
  load(): () => void {
    const timer = setInterval(() => this.#ask(), 250);
    return () => clearInterval(timer);
  }

  /** On the shelf and off it again: an alarm message each time, and no flood limit holds back what a person asked for. */
  #ask(): void {
    const k = this.#asks++;
    const verb = Math.floor(k / 4) % 2 === 0 ? 'shelve' : 'unshelve';
    const ask = { id: `ask-${process.pid}-${k}`, alarm: `${pointKeys[k % 4]}.high`, by: 'test' };
    const body = JSON.stringify(verb === 'shelve' ? { ...ask, minutes: 30 } : ask);
    this.room.client.publish(`forebay/${site}/ask/${verb}`, body, { qos: 1 });
  }

  /** Until each of the points has a good reading of samples sent after now; how long that took, in seconds. */
  async flows(points: readonly string[] = pointKeys, withinMs = 30_000): Promise<number> {
    const began = performance.now();
    // A record is a second long: what arrives this soon began before.
    const from = began + 1000;
    await until(
      () => points.every((point) => (this.room.goodMs.get(point) ?? 0) > from),
      `readings of ${points.filter((point) => !((this.room.goodMs.get(point) ?? 0) > from)).join(', ')}`,
      withinMs,
    );
    return (performance.now() - began) / 1000;
  }

  /** Once nothing waits any more: what became of the alarms. */
  async alarms(withinMs = 20_000): Promise<Alarms> {
    const settled = () => {
      const { lost } = this.#compare();
      return lost === 0;
    };
    await until(settled, 'all alarms to arrive', withinMs).catch(() => undefined);
    return this.#compare();
  }

  #compare(): Alarms {
    const ledger = this.ledger();
    const heard = new Set([...this.room.alarms.values()].flat());
    let disordered = 0;
    for (const ids of this.room.alarms.values()) {
      for (let i = 1; i < ids.length; i++) {
        const [before, after] = [ids[i - 1]!.split('-'), ids[i]!.split('-')];
        if (before[0] === after[0] && Number(after[1]) < Number(before[1])) disordered++;
      }
    }
    const received = ledger.filter((id) => heard.has(id)).length;
    return { sent: ledger.length, received, lost: ledger.length - received, disordered };
  }

  /** Records of the nodes' samples that came to no good reading at the subscriber so far. */
  readingsLost(points: readonly string[] = pointKeys): number {
    return points.reduce((sum, point) => {
      const records = this.room.readings.get(point);
      return sum + (records ? records.expected - records.good : 0);
    }, 0);
  }

  async stop(): Promise<void> {
    for (const node of this.nodes) node.stop();
    await this.agent.stop('SIGKILL');
    for (const cable of this.cables) cable.unplug();
    await this.room.client.endAsync(true);
    await this.link.stop();
    await this.broker.stop();
    for (const undo of this.#undo) undo();
    await this.agent.dispose();
  }
}
