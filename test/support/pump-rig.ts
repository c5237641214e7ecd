/**
 * A station of six pumps on one node, small enough to live through an alarm in seconds: a node over a pseudo-terminal
 * whose vibration the test sets, the agent as a process of its own, a broker that outlives it, and a client.
 */
import mqtt, { type MqttClient } from 'mqtt';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { AgentProcess } from './agent.ts';
import { startAedes, type TestBroker } from './broker.ts';
import { sleep } from './proxy.ts';
import { gaussian } from './seeded.ts';
import { PacedSender, type SentNode } from './sender.ts';
import { SocatCable } from './socat.ts';

const rateHz = 5120;
const shaftHz = 25;
const gPerCount = 2 ** -12;
const singles = ['1', '2', '3', '4', '5'] as const;
const channels = [...singles, 'p', 'q', 'r'] as const;
type Channel = (typeof channels)[number];

const node: SentNode = {
  node: 7,
  rateHz,
  format: 'i16',
  channels: channels.map((name) => ({ name, unit: 'g' as const, scale: gPerCount })),
  serialNumber: 'A1',
  firmware: '0.9',
};

const single = (name: string) => `  - id: pump-${name}
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1500, tolerance_pct: 3}
    start_delay_s: 1
    points: [{id: h, link: node-1, channel: "${name}"}]
`;

/** Zones of ISO 10816-7 category I up to 200 kW: 2.5, 4.0, 6.6 mm/s. */
const stationText = (port: number, asks: string) => `
site: {id: weir, mains_hz: 50}
broker: {url: "mqtt://127.0.0.1:${port}", client_id: weir-gateway, protocol: 3.1.1}
storage: {directory: FOLDER/state}
publish: {change_pct: 20, min_interval_s: 2, at_least_s: 10}
measure:
  every_s: 0.5
  velocity: {fmax_hz: 1000, lines: 800, averages: 3}
  bands: [{id: running-speed, orders: [0.8, 1.2]}]
  envelope: {lines: 100, averages: 2}
links:
  - {id: node-1, serial: {path: FOLDER/tty, baud: 3000000}, format: frames, expect: {node: 7}}
machines:
${singles.map(single).join('')}  - id: pump-6
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1500, tolerance_pct: 3}
    start_delay_s: 1
    points: [{id: p, link: node-1, channel: p}, {id: q, link: node-1, channel: q}, {id: r, link: node-1, channel: r}]
alarms:
  - {id: zone, watch: velocity.overall, zones: true, on_delay_s: 2, off_delay_s: 2}
  - {id: shift, watch: velocity.overall, baseline: {alert: 2}, on_delay_s: 2, off_delay_s: 2, points: [pump-1/h]}
  - {id: stuck, watch: velocity.overall, above: {alert: 8}, latched: true, on_delay_s: 1, off_delay_s: 1, points: [pump-1/h]}
asks: [${asks}]
`;

const allAsks =
  'readings, journal, acknowledge, shelve, unshelve, out-of-service, in-service, reset, note, test, trend, baseline';

export interface Heard {
  topic: string;
  payload: Record<string, unknown>;
}

const schemaOf: [RegExp, keyof typeof payloadSchemas][] = [
  [/^agent$/, 'agent'],
  [/^health$/, 'health'],
  [/\/reading$/, 'reading'],
  [/\/alarm\/[^/]+$/, 'alarm'],
  [/\/state$/, 'state'],
  [/\/finding$/, 'finding'],
  [/^answer\//, 'answer'],
];

export class PumpRig {
  /** Velocity of each channel in mm/s RMS; 0: at rest. */
  readonly mmS: Record<Channel, number> = { 1: 2, 2: 2, 3: 2, 4: 2, 5: 2, p: 2, q: 2, r: 2 };
  /** All that a subscriber got below `forebay/weir/`, in order; repeats of an id are left out. */
  readonly heard: Heard[] = [];
  readonly agent: AgentProcess;
  readonly #broker: TestBroker;
  readonly #client: MqttClient;
  readonly #sender: PacedSender;
  #cable: SocatCable | null = null;
  readonly #ids = new Set<unknown>();
  #asks = 0;
  #askedMs = 0;

  private constructor(broker: TestBroker, client: MqttClient, asks: string) {
    this.#broker = broker;
    this.#client = client;
    this.agent = new AgentProcess(stationText(broker.port, asks));
    const noise = gaussian(11);
    this.#sender = new PacedSender(node, (bytes) => this.#cable?.write(bytes), {
      counts: (first, n) => this.#counts(first, n, noise),
    });
    client.on('message', (topic, bytes) => this.#hear(topic.slice('forebay/weir/'.length), bytes));
  }

  static async start(asks = allAsks): Promise<PumpRig> {
    const broker = await startAedes();
    const client = await mqtt.connectAsync(`mqtt://127.0.0.1:${broker.port}`);
    await client.subscribeAsync('forebay/weir/#', { qos: 1 });
    const rig = new PumpRig(broker, client, asks);
    await rig.plug();
    await rig.agent.start();
    rig.#sender.start();
    return rig;
  }

  /** Publishes as a client would, whatever comes of it. */
  async publish(verb: string, payload: string, retain = false): Promise<void> {
    await this.#client.publishAsync(`forebay/weir/ask/${verb}`, payload, { qos: 1, retain });
  }

  async plug(): Promise<void> {
    this.#cable = await SocatCable.lay(`${this.agent.folder}/tty`);
  }

  /** The device goes away under the agent. */
  unplug(): void {
    this.#cable?.cut();
    this.#cable = null;
  }

  /** Power off and on again; what the node sends meanwhile is lost. `meanwhile` happens in the dark. */
  async powerCut(meanwhile: () => void = () => undefined): Promise<void> {
    await this.agent.stop('SIGKILL');
    this.#sender.stop();
    meanwhile();
    await this.agent.start();
    this.#sender.start();
  }

  /** Alarm messages of a topic so far, as `state level`. */
  told(topic: string): string[] {
    return this.alarms(topic).map(({ state, level }) => `${state} ${level}`);
  }

  alarms(topic: string): Record<string, unknown>[] {
    return this.heard.filter((message) => message.topic === topic).map(({ payload }) => payload);
  }

  last(topic: string): Record<string, unknown> | undefined {
    return this.alarms(topic).at(-1);
  }

  /** Waits until a topic's newest message has these keys. */
  async until(topic: string, keys: Record<string, unknown>, withinS = 20): Promise<Record<string, unknown>> {
    const till = performance.now() + 1000 * withinS;
    for (;;) {
      const last = this.last(topic);
      if (last && Object.entries(keys).every(([key, value]) => last[key] === value)) return last;
      if (performance.now() > till) {
        throw new Error(`${topic} is not ${JSON.stringify(keys)} but ${JSON.stringify(last)}`);
      }
      await sleep(50);
    }
  }

  /** Waits for some more readings of the point to have been judged: a second and more of signal. */
  async settle(seconds = 4): Promise<void> {
    await sleep(1000 * seconds);
  }

  /** The answer to an ask, its body as a record or as raw text; no more than one a second. */
  async ask(
    verb: string,
    body: Record<string, unknown> | string,
    id = `c-${++this.#asks}`,
  ): Promise<Record<string, unknown>> {
    await sleep(Math.max(0, this.#askedMs + 1050 - performance.now()));
    this.#askedMs = performance.now();
    const payload = typeof body === 'string' ? body : JSON.stringify({ id, ...body });
    await this.publish(verb, payload);
    return await this.until(`answer/${id}`, { ask: id }, 10);
  }

  /** What is wrong with the messages heard, by the schemas that ship; empty: nothing. */
  invalid(): string[] {
    return this.heard.flatMap(({ topic, payload }) => {
      const name = schemaOf.find(([pattern]) => pattern.test(topic))?.[1];
      if (name === undefined) return [`${topic}: no schema`];
      const { error } = payloadSchemas[name].safeParse(payload);
      return error ? [`${topic}: ${error.message}`] : [];
    });
  }

  async dispose(): Promise<void> {
    this.#sender.stop();
    await this.agent.dispose();
    this.unplug();
    await this.#client.endAsync(true);
    await this.#broker.stop();
  }

  #hear(topic: string, bytes: Buffer): void {
    if (topic.startsWith('ask/') || bytes.length === 0) return;
    const payload = JSON.parse(String(bytes)) as Record<string, unknown>;
    if (this.#ids.has(payload.id)) return;
    this.#ids.add(payload.id);
    this.heard.push({ topic, payload });
  }

  #counts(first: number, n: number, noise: () => number): Int16Array {
    const counts = new Int16Array(n * channels.length);
    // An RMS velocity of V mm/s at f is a peak acceleration of √2·2πf·V/1000 m/s²; 1 g = 9.80665 m/s².
    const gPerMmS = (Math.SQRT2 * 2 * Math.PI * shaftHz) / 1000 / 9.80665;
    for (let i = 0; i < n; i++) {
      const sine = Math.sin((2 * Math.PI * shaftHz * (first + i)) / rateHz);
      for (const [c, name] of channels.entries()) {
        const g = gPerMmS * this.mmS[name] * sine + 0.003 * noise();
        counts[i * channels.length + c] = Math.round(g / gPerCount);
      }
    }
    return counts;
  }
}
