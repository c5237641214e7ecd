/**
 * The waveform of an alarm, end to end: a node that sends known counts, the agent as a process of its own, a broker
 * behind a thin and faulty link, and `forebay pull`. What arrives is compared with what was sent, sample for sample.
 * FOREBAY_LONG=1 fetches the whole snapshot of 15 s over the thin link instead of three seconds of it.
 */
import { spawnSync } from 'node:child_process';
import { existsSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import mqtt, { type MqttClient } from 'mqtt';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { type PullOptions, pullCommand } from '../../src/cli/pull.ts';
import { writeSnapshot } from '../../src/snapshot/flac-write.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { AgentProcess, command } from '../support/agent.ts';
import { startAedes, type TestBroker } from '../support/broker.ts';
import { haveMosquitto, Mosquitto } from '../support/mosquitto.ts';
import { FaultyLink, sleep } from '../support/proxy.ts';
import type { SentNode } from '../support/sender.ts';
import { someTags } from '../support/tagged.ts';
import { TcpNode } from '../support/tcp-node.ts';

const rateHz = 40_960;
const gPerCount = 2 ** -12;
const long = process.env.FOREBAY_LONG === '1';
/** Vibration rises at this sample: 12 s after the start. */
const risesAt = 12 * rateHz;

const node: SentNode = {
  node: 7,
  rateHz,
  format: 'i16',
  channels: ['h', 'v', 'a'].map((name) => ({ name, unit: 'g' as const, scale: gPerCount })),
  serialNumber: 'A1',
  firmware: '0.9',
};

/** A tone of 25 Hz with a little noise from a hash of the index: any sample can be made again. */
function countAt(channel: number, index: number): number {
  // An RMS velocity of V mm/s at f is a peak acceleration of √2·2πf·V/1000 m/s²; 1 g = 9.80665 m/s².
  const mmS = (index < risesAt ? 1 : 9) * [1, 0.5, 0.2][channel]!;
  const g =
    ((Math.SQRT2 * 2 * Math.PI * 25 * mmS) / 1000 / 9.80665) * Math.sin((2 * Math.PI * 25 * index) / rateHz);
  const noise = (Math.imul(index * 3 + channel + 1, 2654435761) >>> 28) - 8;
  return Math.round(g / gPerCount) + (noise >> 1);
}

const stationText = (broker: string, nodePort: number) => `
site: {id: weir, mains_hz: 50}
broker: ${broker}
storage: {directory: FOLDER/state}
measure:
  every_s: 1
  velocity: {fmax_hz: 1000, lines: 800, averages: 1}
  envelope: {lines: 100, averages: 1}
links:
  - {id: node-1, tcp: {host: 127.0.0.1, port: ${nodePort}}, format: frames, expect: {node: 7, sample_rate_hz: 40960}}
machines:
  - id: pump-1
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1500, tolerance_pct: 3}
    start_delay_s: 0
    points: [{id: h, link: node-1, channel: h}, {id: v, link: node-1, channel: v}, {id: a, link: node-1, channel: a}]
alarms:
  - {id: zone, watch: velocity.overall, zones: true, on_delay_s: 3}
  - {id: high, watch: velocity.overall, above: {alert: 7}, on_delay_s: 2, points: [pump-1/h]}
  - {id: brief, watch: velocity.overall, above: {alert: 5}, on_delay_s: 3600, points: [pump-1/h]}
asks: [readings, snapshots, snapshot, fetch, acknowledge]
`;

let broker: TestBroker | Mosquitto;
let thin: FaultyLink;
let sensor: TcpNode;
let agent: AgentProcess;
let client: MqttClient;
let url: string;
/** JSON messages by topic, newest last. */
const heard = new Map<string, Record<string, unknown>[]>();
/** How often each part of each ask was heard. */
const parts = new Map<string, number>();

const newest = (topic: string) => heard.get(`forebay/weir/${topic}`)?.at(-1);

async function until<T>(what: string, holds: () => T | undefined | null | false, withinS = 40): Promise<T> {
  const till = performance.now() + withinS * 1000;
  for (;;) {
    const found = holds();
    if (found) return found;
    if (performance.now() > till) throw new Error(`waited ${withinS} s in vain for ${what}`);
    await sleep(50);
  }
}

async function ask(verb: string, body: Record<string, unknown>): Promise<Record<string, unknown>> {
  const id = `t-${Math.random().toString(36).slice(2)}`;
  await client.publishAsync(`forebay/weir/ask/${verb}`, JSON.stringify({ id, ...body }), { qos: 1 });
  return await until(`the answer to ${verb}`, () => newest(`answer/${id}`), 15);
}

function options(file: string, changes: Partial<PullOptions>): PullOptions & { said: string } {
  const err = {
    write: (text: string) => {
      result.said += text;
    },
  };
  const none = {
    username: null,
    passwordFile: null,
    caFile: null,
    certFile: null,
    keyFile: null,
    protocol: null,
  };
  const result: PullOptions & { said: string } = {
    said: '',
    ...none,
    broker: url,
    site: 'weir',
    snapshot: null,
    point: null,
    seconds: null,
    fromS: null,
    channels: null,
    file,
    force: false,
    err,
    ...changes,
  };
  return result;
}

/** Every count of the file against the one that was sent at its index. */
function expectAsSent(
  file: string,
  channels: readonly number[] = [0, 1, 2],
): { frames: number; firstIndex: number } {
  const recording = openRecording(file);
  const { tags, frames } = recording;
  expect(recording.channels).toBe(channels.length);
  const firstIndex = tags!.firstIndex;
  let wrong = 0;
  recording.read(0, frames).forEach((counts, c) => {
    for (let i = 0; i < frames; i++) if (counts[i] !== countAt(channels[c]!, firstIndex + i)) wrong++;
  });
  expect(wrong).toBe(0);
  return { frames, firstIndex };
}

beforeAll(async () => {
  broker = haveMosquitto ? await Mosquitto.start() : await startAedes();
  thin = await FaultyLink.start(broker.port);
  url = `mqtt://127.0.0.1:${broker.port}`;
  client = await mqtt.connectAsync(url, { protocolVersion: haveMosquitto ? 5 : 4 });
  client.on('message', (topic, payload) => {
    const part = /\/answer\/[^/]+\/\d+$/.test(topic);
    if (part) parts.set(topic, (parts.get(topic) ?? 0) + 1);
    else if (payload.length > 0) heard.set(topic, [...(heard.get(topic) ?? []), JSON.parse(String(payload))]);
  });
  await client.subscribeAsync('forebay/weir/+/alarm/+', { qos: 1 });
  await client.subscribeAsync(['forebay/weir/+/+/reading', 'forebay/weir/agent'], { qos: 1 });
  await client.subscribeAsync('forebay/weir/answer/#', { qos: 1 });
  sensor = await TcpNode.start(node, countAt);
  agent = new AgentProcess(
    stationText(`{url: "mqtt://127.0.0.1:${thin.port}", client_id: weir-gateway}`, sensor.port),
  );
  await agent.start();
  await sensor.begin();
}, 60_000);

afterAll(async () => {
  await client?.endAsync(true);
  await agent?.dispose();
  await sensor?.stop();
  await thin?.stop();
  await broker?.stop();
});

describe('the waveform of an alarm', () => {
  let snapshot = '';

  it('is named by the alarm, holds the samples as they were sent, and is kept once', async () => {
    const alarm = await until('the zone alarm', () => {
      const last = newest('pump-1/alarm/h.zone');
      return last?.state === 'unacknowledged' && last;
    });
    expect(payloadSchemas.alarm.safeParse(alarm).error).toBeUndefined();
    snapshot = String(alarm.snapshot);
    expect(snapshot).toMatch(/^\d{8}T\d{6}Z-pump-1-[0-9a-f]{4}$/);
    const high = await until('the other alarm', () => newest('pump-1/alarm/h.high'));
    expect(high.snapshot).toBe(snapshot);
    const file = join(agent.folder, 'state/snapshots', `${snapshot}.flac`);
    await until('the snapshot to be written', () => existsSync(file));
    const { frames, firstIndex } = expectAsSent(file);
    // 10 s before the end of the first record over the limit and 5 s after it.
    expect(frames / rateHz).toBeCloseTo(15, 0);
    expect(firstIndex).toBeLessThan(risesAt);
    expect(firstIndex + frames).toBeGreaterThan(risesAt + 5 * rateHz);
    const { tags } = openRecording(file);
    expect(tags).toMatchObject({
      id: snapshot,
      site: 'weir',
      machines: ['pump-1'],
      nominalRateHz: rateHz,
      nodeSerial: 'A1',
      kind: 'alarm',
      gaps: [],
      channels: ['h', 'v', 'a'].map((name) => ({
        name,
        points: [`pump-1/${name}`],
        unitsPerCount: gPerCount,
      })),
    });
    expect(tags?.shafts[0]?.hz).toBeCloseTo(25, 1);
    // Two alarms came of it and a third is over its limit: one stretch, one file.
    expect(
      readdirSync(join(agent.folder, 'state/snapshots')).filter((name) => name.endsWith('.flac')),
    ).toHaveLength(1);
  });

  it('gives the readings of the live run when it is replayed', async () => {
    const file = join(agent.folder, 'state/snapshots', `${snapshot}.flac`);
    const points = 'pump-1/h,pump-1/v,pump-1/a';
    const { stdout } = spawnSync(
      process.execPath,
      [command, 'replay', file, '-c', agent.stationFile, '--points', points, '--json'],
      { encoding: 'utf8', maxBuffer: 1e8 },
    );
    const replayed = stdout
      .trim()
      .split('\n')
      .map((line) => JSON.parse(line) as Record<string, unknown>);
    const live = (heard.get('forebay/weir/pump-1/h/reading') ?? []).filter(({ zone }) => zone !== 'A');
    const pairs = live.flatMap((reading) => {
      const same = replayed.find(
        (line) => line.kind === 'reading' && line.point === 'h' && line.first_index === reading.first_index,
      );
      return same ? [[reading, same]] : [];
    });
    expect(pairs.length).toBeGreaterThan(0);
    for (const [reading, same] of pairs) expect(same!.velocity).toEqual(reading!.velocity);
  });

  it(
    'arrives whole over 5 kB/s with 300 ms of delay and cuts',
    async () => {
      sensor.sender.stop();
      thin.bytesPerS = 5000;
      thin.delayMs = 300;
      parts.clear();
      const file = join(agent.folder, 'thin.flac');
      const cut = long ? {} : { fromS: 8, seconds: 3 };
      const pull = options(file, { snapshot, ...cut });
      let done = false;
      const pulled = pullCommand(pull).finally(() => {
        done = true;
      });
      let cuts = 0;
      for (const share of [3, 7, 11]) {
        await until(`${share} parts`, () => parts.size >= share || done, 120);
        if (done) break;
        thin.cut();
        cuts++;
      }
      expect(await pulled).toBe(0);
      thin.bytesPerS = null;
      thin.delayMs = 0;
      const { frames } = expectAsSent(file);
      if (!long) expect(frames).toBe(Math.round(3 * openRecording(file).rateHz));
      expect(cuts).toBe(3);
      // Two parts are in flight; what was acknowledged is not sent again.
      const again = [...parts.values()].reduce((sum, times) => sum + times - 1, 0);
      expect(again).toBeLessThanOrEqual(2 * cuts);
      expect(pull.said).toContain('verified');
      expect(pull.said).toMatch(/ % {2}[\d.]+ kB of [\d.]+ kB/);
    },
    long ? 1_200_000 : 240_000,
  );

  it('is gone on with where Ctrl-C broke it off, and never replaces a file unasked', async () => {
    thin.bytesPerS = 20_000;
    parts.clear();
    const file = join(agent.folder, 'resumed.flac');
    const stop = new AbortController();
    const first = options(file, { snapshot, signal: stop.signal, channels: ['v'] });
    const broken = pullCommand(first);
    await until('some parts', () => parts.size >= 6, 60);
    stop.abort();
    expect(await broken).toBe(1);
    expect(first.said).toContain('broken off');
    expect(existsSync(file)).toBe(false);
    const had = (JSON.parse(readFileSync(`${file}.part.json`, 'utf8')) as { have: number[]; parts: number })
      .have;
    expect(had.length).toBeGreaterThan(2);
    // The station is told to stop.
    await sleep(1500);
    const sent = parts.size;
    await sleep(1500);
    expect(parts.size).toBe(sent);
    parts.clear();
    thin.bytesPerS = null;
    const second = options(file, { snapshot, channels: ['v'] });
    expect(await pullCommand(second)).toBe(0);
    expectAsSent(file, [1]);
    const numbers = [...parts.keys()].map((topic) => Number(topic.slice(topic.lastIndexOf('/') + 1)));
    expect(numbers.filter((part) => had.includes(part))).toEqual([]);
    expect(existsSync(`${file}.part`)).toBe(false);
    writeFileSync(file, 'mine');
    await expect(pullCommand(options(file, { snapshot }))).rejects.toMatchObject({ code: 'file.exists' });
    expect(readFileSync(file, 'utf8')).toBe('mine');
  }, 60_000);

  it('is taken on demand, listed, and refused with a plain reason', async () => {
    await expect(pullCommand(options(join(agent.folder, 'old.flac'), { point: 'pump-1/a' }))).rejects.toThrow(
      'refused by the station: link node-1 is not receiving: no bytes for 3 s',
    );
    await sensor.begin();
    await sleep(2500);
    const file = join(agent.folder, 'now.flac');
    const taken = options(file, { point: 'pump-1/a', seconds: 1 });
    expect(await pullCommand(taken)).toBe(0);
    expect(openRecording(file).tags).toMatchObject({ kind: 'asked', cause: 'asked for pump-1/a' });
    expectAsSent(file);
    const list = (await ask('snapshots', {})).snapshots as Record<string, unknown>[];
    expect(list).toHaveLength(2);
    expect(list[1]).toMatchObject({
      snapshot,
      kind: 'alarm',
      channels: ['h', 'v', 'a'],
      machines: ['pump-1'],
    });
    const refusal = (changes: Partial<PullOptions>) =>
      pullCommand(options(join(agent.folder, 'no.flac'), changes));
    await expect(refusal({ point: 'pump-1/z' })).rejects.toMatchObject({
      code: 'pull.refused',
      message: 'refused by the station: there is no point pump-1/z',
    });
    await expect(refusal({ snapshot: 'none' })).rejects.toThrow(/there is no snapshot none/);
    await expect(refusal({ snapshot, channels: ['z'] })).rejects.toThrow(/it has the channels h, v, a/);
    await expect(refusal({ snapshot, fromS: 99 })).rejects.toThrow(/it is 15\.\d+ s long/);
    await expect(refusal({ snapshot, site: 'elsewhere' })).rejects.toMatchObject({ code: 'pull.no-station' });
    await expect(refusal({ snapshot, broker: 'mqtt://127.0.0.1:1' })).rejects.toMatchObject({
      code: 'uplink.unreachable',
    });
  }, 60_000);

  it('is still named after a restart, and half a file is removed then', async () => {
    const folder = join(agent.folder, 'state/snapshots');
    await agent.stop('SIGKILL');
    writeFileSync(join(folder, '.writing-x.flac'), 'half');
    writeFileSync(join(folder, '20200101T000000Z-pump-1-0000.flac'), 'fLaC');
    await agent.start();
    await until('the agent to answer', () => newest('agent')?.state === 'online', 20);
    const list = (await ask('snapshots', {})).snapshots as Record<string, unknown>[];
    expect(list.map((line) => line.snapshot)).toContain(snapshot);
    expect(list).toHaveLength(2);
    expect(readdirSync(folder).filter((name) => name.includes('writing') || name.includes('2020'))).toEqual(
      [],
    );
    expect(await ask('acknowledge', { alarm: 'pump-1/h.zone', by: 'test' })).toMatchObject({ ok: true });
    const acknowledged = await until('the acknowledgement', () => {
      const last = newest('pump-1/alarm/h.zone');
      return last?.state === 'acknowledged' && last;
    });
    expect(acknowledged.snapshot).toBe(snapshot);
    await agent.stop();
    await expect(pullCommand(options(join(agent.folder, 'off.flac'), { snapshot }))).rejects.toMatchObject({
      code: 'pull.offline',
    });
  }, 60_000);

  it('ages on where the database broke: what is taken then is the newest', async () => {
    const folder = join(agent.folder, 'state/snapshots');
    const id = '20260302T101530Z-pump-1-0001';
    const tags = { ...someTags, id, takenRunS: 3e6 };
    const counts = someTags.channels.map(() => new Int32Array(500));
    await writeSnapshot({ path: join(folder, `${id}.flac`), counts, tags });
    for (const name of ['forebay.db-wal', 'forebay.db-shm'])
      rmSync(join(agent.folder, 'state', name), { force: true });
    writeFileSync(join(agent.folder, 'state/forebay.db'), 'no database');
    await agent.start();
    await until('the agent to answer', () => newest('agent')?.state === 'online', 20);
    await sleep(2500);
    const file = join(agent.folder, 'aged.flac');
    expect(await pullCommand(options(file, { point: 'pump-1/a', seconds: 1 }))).toBe(0);
    const { tags: taken } = openRecording(file);
    expect(taken!.takenRunS).toBeGreaterThanOrEqual(3e6);
    const list = (await ask('snapshots', {})).snapshots as Record<string, unknown>[];
    expect(list.slice(0, 2).map((line) => line.snapshot)).toEqual([taken!.id, id]);
  }, 60_000);
});
