/**
 * The main job on real parts: a sender written from the page of the sensor link alone, a pseudo-terminal made by
 * socat, the agent as a process of its own, a broker, and a subscriber on whose messages everything is asserted.
 */
import { spawn, spawnSync } from 'node:child_process';
import { writeFileSync } from 'node:fs';
import mqtt from 'mqtt';
import { afterEach, describe, expect, it } from 'vitest';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { AgentProcess, command } from '../support/agent.ts';
import { freePort, haveMosquitto, Mosquitto } from '../support/mosquitto.ts';
import { sleep } from '../support/proxy.ts';
import { pumpCounts } from '../support/pump-signal.ts';
import { NodeFrames, type SentNode } from '../support/sender.ts';
import { haveSocat, SocatCable } from '../support/socat.ts';
import { wavBytes } from '../support/wav.ts';

const rateHz = 40_960;
const seconds = 21;
const gPerCount = 2 ** -12;
/** 9 elements of 7.938 mm on 39.04 mm: BPFO = 9/2·(1 − 7.938/39.04) = 3.58503 × shaft (check by hand). */
const bpfoHz = 25 * 4.5 * (1 - 7.938 / 39.04);

const node: SentNode = {
  node: 7,
  rateHz,
  format: 'i16',
  channels: ['h', 'v', 'a'].map((name) => ({ name, unit: 'g' as const, scale: gPerCount })),
  serialNumber: 'A1',
  firmware: '0.9',
};

const stationText = (broker: string) => `
site: {id: test-weir, name: Test weir, mains_hz: 50}
broker: ${broker}
storage: {directory: FOLDER/state}
publish: {change_pct: 1, min_interval_s: 1, at_least_s: 5}
links:
  - id: node-1
    serial: {path: FOLDER/tty, baud: 3000000}
    format: frames
    expect: {node: 7, serial_number: A1, sample_rate_hz: 40960, channels: [h, v, a]}
machines:
  - id: pump-1
    name: Duty pump 1
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1500, tolerance_pct: 3}
    start_delay_s: 0
    bearings:
      - {id: de, elements: 9, element_mm: 7.938, pitch_mm: 39.04, contact_deg: 0}
    points:
      - {id: h, link: node-1, channel: h, direction: horizontal, part: motor, end: de, bearing: de}
      - {id: v, link: node-1, channel: v, direction: vertical, part: motor, end: de, bearing: de}
      - {id: a, link: node-1, channel: a, direction: axial, part: motor, end: de, bearing: de}
alarms:
  - {id: zone, watch: velocity.overall, zones: true, on_delay_s: 5, off_delay_s: 60, deadband_pct: 10}
  - {id: bearing, watch: envelope.defect, is: [outer], level: alert, readings: [2, 3]}
`;

/** What the three channels carry. */
function countsOfRun(): Int32Array[] {
  const signal = { rateHz, seconds, gPerCount, noiseG: 0.02, tone: { hz: 25, velocityMmS: 10 } };
  const knocks = { hz: bpfoHz, peakG: 1.5, ringHz: 5200, decayS: 0.0008 };
  return [
    pumpCounts({ ...signal, knocks, seed: 1 }),
    pumpCounts({ ...signal, knocks, seed: 2 }),
    pumpCounts({ ...signal, knocks: null, tone: { hz: 25, velocityMmS: 2 }, seed: 3 }),
  ];
}

/** All frames of the run, made beforehand: the sender only has to keep time. */
function framesOf(channels: readonly Int32Array[]): { at: number; bytes: Uint8Array }[] {
  const maker = new NodeFrames(node);
  const frames: { at: number; bytes: Uint8Array }[] = [];
  const n = 512;
  for (let first = 0; first < rateHz * seconds; first += n) {
    if (first % (n * 80) === 0) frames.push({ at: first / rateHz, bytes: maker.describe() });
    const counts = new Int16Array(n * 3);
    for (let i = 0; i < n; i++) for (let c = 0; c < 3; c++) counts[3 * i + c] = channels[c]?.[first + i] ?? 0;
    frames.push({ at: (first + n) / rateHz, bytes: maker.samples(first, counts) });
  }
  return frames;
}

async function send(cable: SocatCable, frames: readonly { at: number; bytes: Uint8Array }[]): Promise<void> {
  const began = performance.now();
  for (const { at, bytes } of frames) {
    const early = at * 1000 - (performance.now() - began);
    if (early > 0) await sleep(early);
    cable.write(bytes);
  }
  while (cable.waitingBytes > 0) await sleep(5);
}

interface Heard {
  topic: string;
  payload: Record<string, unknown>;
}

/** `mosquitto_sub` as a control room would use it. */
function subscribeByCommand(port: number, heard: Heard[]): () => void {
  const child = spawn('mosquitto_sub', ['-p', String(port), '-t', 'forebay/#', '-q', '1', '-F', '%t %p']);
  let text = '';
  child.stdout.on('data', (chunk) => {
    text += String(chunk);
    const lines = text.split('\n');
    text = lines.pop() ?? '';
    for (const line of lines) {
      const space = line.indexOf(' ');
      if (line.length > space + 1)
        heard.push({ topic: line.slice(0, space), payload: JSON.parse(line.slice(space)) });
    }
  });
  return () => child.kill();
}

async function subscribeByClient(port: number, heard: Heard[]): Promise<() => void> {
  const client = await mqtt.connectAsync(`mqtt://127.0.0.1:${port}`);
  client.on('message', (topic, payload) => {
    if (payload.length > 0) heard.push({ topic, payload: JSON.parse(String(payload)) });
  });
  await client.subscribeAsync('forebay/#', { qos: 1 });
  return () => void client.endAsync(true);
}

const schemaOf: [RegExp, keyof typeof payloadSchemas][] = [
  [/\/agent$/, 'agent'],
  [/\/health$/, 'health'],
  [/\/reading$/, 'reading'],
  [/\/alarm\/[^/]+$/, 'alarm'],
  [/\/state$/, 'state'],
  [/\/finding$/, 'finding'],
];

function expectAllValid(heard: readonly Heard[]): void {
  for (const { topic, payload } of heard) {
    const name = schemaOf.find(([pattern]) => pattern.test(topic))?.[1];
    expect(name, topic).toBeDefined();
    if (name) expect(payloadSchemas[name].safeParse(payload).error, topic).toBeUndefined();
  }
  const ids = heard.map(({ payload }) => payload.id);
  expect(new Set(ids).size).toBe(ids.length);
}

/** What a subscriber must have heard of this run, whatever the broker. */
function expectTheMainJob(heard: readonly Heard[], agent: AgentProcess): void {
  const of = (topic: string) => heard.filter((message) => message.topic === `forebay/test-weir/${topic}`);
  // biome-ignore lint/suspicious/noExplicitAny: payloads are checked by their schemas above
  const readings = (point: string) => of(`pump-1/${point}/reading`).map(({ payload }) => payload as any);
  expect(readings('h').length).toBeGreaterThanOrEqual(2);
  for (const point of ['h', 'v']) {
    for (const reading of readings(point)) {
      expect(reading.why).toEqual([]);
      expect(reading.quality).toBe('good');
      expect(reading.velocity['running-speed']).toBeGreaterThan(10 * 0.997);
      expect(reading.velocity['running-speed']).toBeLessThan(10 * 1.003);
      expect(Math.abs(reading.orders['1'].mm_s / 10 - 1)).toBeLessThan(0.003);
      expect(Math.abs(reading.shaft.hz - 25)).toBeLessThan(0.01);
      // One line of the envelope spectrum: the larger of 500 Hz and 3.5 × BPFI over 1600 lines.
      expect(Math.abs(reading.envelope.bpfo.hz - bpfoHz)).toBeLessThan(
        Math.max(500, 3.5 * 5.415 * 25) / 1600,
      );
      expect(reading.envelope.defect).toBe('outer');
      expect(reading.zone).toBe('D');
    }
  }
  for (const reading of readings('a')) {
    expect(reading.envelope.defect).toBeNull();
    // Zones do not apply to an axial reading away from the thrust bearing.
    expect(reading.zone).toBeNull();
  }
  const zoneAlarms = heard
    .filter(({ topic }) => /pump-1\/alarm\/.*zone$/.test(topic))
    .map(({ payload }) => payload);
  expect(zoneAlarms.some(({ state, level }) => state === 'unacknowledged' && level === 'danger')).toBe(true);
  const bearingAlarms = heard.filter(({ topic }) => /pump-1\/alarm\/.*bearing$/.test(topic));
  expect(bearingAlarms.some(({ payload }) => payload.state === 'unacknowledged')).toBe(true);
  expect(of('agent').at(-1)?.payload.state).toBe('offline');
  // No sample lost: the index ends where the sender ended, and nothing is missing.
  const link = agent.log.find(({ msg }) => msg === 'link');
  expect(link).toMatchObject({ link: 'node-1', gaps: 0, missing_samples: 0, head: rateHz * seconds });
}

describe.runIf(haveSocat)('the main job, from a serial device to a subscriber', () => {
  const undo: (() => void | Promise<void>)[] = [];
  afterEach(async () => {
    for (const step of undo.splice(0).reverse()) await step();
  });

  async function runThrough(
    broker: string,
    subscribe: (heard: Heard[]) => Promise<() => void> | (() => void),
  ): Promise<{ heard: Heard[]; agent: AgentProcess; channels: Int32Array[] }> {
    const channels = countsOfRun();
    const frames = framesOf(channels);
    const agent = new AgentProcess(stationText(broker));
    undo.push(() => agent.dispose());
    const cable = await SocatCable.lay(`${agent.folder}/tty`);
    undo.push(() => cable.cut());
    await agent.start();
    const heard: Heard[] = [];
    undo.push(await subscribe(heard));
    await sleep(300);
    await send(cable, frames);
    await sleep(1500);
    expect(await agent.stop()).toBe(0);
    await sleep(300);
    return { heard, agent, channels };
  }

  /** The replay of the same counts at the rate that a live reading was measured with. */
  function replayed(agent: AgentProcess, rateHz: unknown): Record<string, unknown>[] {
    const wav = `${agent.folder}/run.wav`;
    const points = 'pump-1/h,pump-1/v,pump-1/a';
    const scale = String(2 ** 15 * gPerCount);
    const args = [
      'replay',
      wav,
      '-c',
      agent.stationFile,
      '--points',
      points,
      '--full-scale-g',
      scale,
      '--json',
    ];
    const run = spawnSync(process.execPath, [command, ...args, '--rate-hz', String(rateHz)], {
      encoding: 'utf8',
    });
    expect(run.stderr).toBe('');
    expect(run.status).toBe(0);
    return run.stdout
      .trim()
      .split('\n')
      .map((line) => JSON.parse(line) as Record<string, unknown>);
  }

  it('with the embedded broker', async () => {
    const port = await freePort();
    const { heard, agent, channels } = await runThrough(`{embedded: {port: ${port}}}`, (into) =>
      subscribeByClient(port, into),
    );
    expectAllValid(heard);
    // The embedded broker goes with the agent, so its farewell may not arrive; all else is as with any broker.
    const farewell = { topic: 'forebay/test-weir/agent', payload: { state: 'offline' } };
    expectTheMainJob([...heard, farewell], agent);

    // The same counts, first index, rate and scale give the same readings in replay; id, wall time and who said the
    // rate aside.
    writeFileSync(`${agent.folder}/run.wav`, wavBytes(channels, rateHz, 16));
    const live = heard.filter(({ topic }) => topic.endsWith('/reading'));
    expect(live.length).toBeGreaterThanOrEqual(6);
    for (const { topic, payload } of live) {
      const { id: _id, t: _t, rate, ...figures } = payload;
      const again = replayed(agent, (rate as { hz: number }).hz).find(
        ({ kind, point, first_index }) =>
          kind === 'reading' && topic.endsWith(`/${point}/reading`) && first_index === figures.first_index,
      );
      expect(again, topic).toMatchObject(figures);
    }
  }, 90_000);

  it.runIf(haveMosquitto).each(['5', '3.1.1'])(
    'with mosquitto over MQTT %s, asserted on what mosquitto_sub prints',
    async (protocol) => {
      const mosquitto = await Mosquitto.start();
      undo.push(() => mosquitto.stop());
      const broker = `{url: "mqtt://127.0.0.1:${mosquitto.port}", client_id: test-weir-gateway, protocol: ${protocol}}`;
      const { heard, agent } = await runThrough(broker, (into) => subscribeByCommand(mosquitto.port, into));
      expectAllValid(heard);
      expectTheMainJob(heard, agent);
      const connected = agent.log.find(({ msg }) => msg === 'connected');
      expect(connected?.protocol).toBe(protocol === '5' ? 5 : 4);
    },
    90_000,
  );
});
