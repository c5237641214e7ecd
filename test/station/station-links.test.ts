/** Readings without figures: where none come, nothing old may stand for the present. */
import { afterEach, describe, expect, it } from 'vitest';
import { RingWriter } from '../../src/link/ring.ts';
import type { Reading } from '../../src/measure/reading.ts';
import type { MeasureJob, MeasureOutcome } from '../../src/station/measure-job.ts';
import { ringSecondsOf, StationLinks } from '../../src/station/station-links.ts';
import { ToldValues } from '../../src/station/told.ts';
import { stationOf } from '../config/station-text.ts';
import { until } from '../support/broker-rig.ts';
import { freePort } from '../support/mosquitto.ts';
import { sleep } from '../support/proxy.ts';
import { TcpNode } from '../support/tcp-node.ts';

const rateHz = 2048;
const cleanups: (() => Promise<unknown>)[] = [];
afterEach(async () => {
  for (const end of cleanups.splice(0).reverse()) await end();
});

const machine = (id: string, channel: string) => `
  - id: ${id}
    shaft: {rpm: 1500, tolerance_pct: 3}
    points: [{id: ${channel}, link: node-1, channel: ${channel}}]`;
const stationText = (port: number, machines: string) => `
site: {id: weir, mains_hz: 50}
broker: {embedded: {port: 1883}}
storage: {directory: /nowhere}
measure: {every_s: 1, velocity: {fmax_hz: 500, lines: 200, averages: 1}, envelope: {band_hz: [100, 700], lines: 100, averages: 1}}
links: [{id: node-1, tcp: {host: 127.0.0.1, port: ${port}}, format: frames}]
machines:${machines}
`;

/** The links of a station over a measuring room that gives one outcome for all. */
function started(text: string, measure: () => Promise<MeasureOutcome>) {
  const told: { key: string; reading: Reading; elapsedS: number | null }[] = [];
  const conditions: string[] = [];
  const station = stationOf(text);
  const room = { addRing: () => undefined, forgetRing: () => undefined, replan: () => undefined, measure };
  const links = new StationLinks(station, room, new ToldValues([], () => 0), {
    wallMs: () => 0,
    reading: ({ key }, reading, _, elapsedS) => told.push({ key, reading, elapsedS }),
    condition: (_, now) => conditions.push(...now),
  });
  cleanups.push(() => links.stop());
  links.start();
  return { links, told, conditions };
}

async function startNode(): Promise<TcpNode> {
  const channels = ['h', 'v'].map((name) => ({ name, unit: 'g' as const, scale: 2 ** -12 }));
  const node = await TcpNode.start(
    { node: 7, rateHz, format: 'i16', channels, serialNumber: 'A1', firmware: '0.9' },
    (channel, index) => Math.round(400 * Math.sin((2 * Math.PI * 25 * index) / rateHz)) + (channel % 7),
  );
  cleanups.push(() => node.stop());
  return node;
}

describe('a machine that comes with a new configuration', () => {
  it('on a link that is not heard has a reading that says so, and what was there before none anew', async () => {
    const port = await freePort();
    const { links, told, conditions } = started(stationText(port, machine('pump-1', 'h')), async () => ({
      id: 0,
      missed: 'nothing to measure',
    }));
    await until(() => conditions.includes('refused'), 'the condition');
    expect(told.map(({ key }) => key)).toEqual(['pump-1/h']);
    const next = stationOf(stationText(port, machine('pump-1', 'h') + machine('pump-2', 'v')));
    await links.replan(next, ringSecondsOf(next));
    expect(told.map(({ key }) => key)).toEqual(['pump-1/h', 'pump-2/v']);
    expect(told[1]!.reading).toMatchObject({ quality: 'bad', running: null });
    expect(told[1]!.reading.why[0]).toMatch(/^refused: /);
    // The alarms hear it again: a single bad reading would not make the new machine unknown.
    expect(conditions).toEqual(['refused', 'refused']);
    await links.replan(next, ringSecondsOf(next));
    expect([told.length, conditions.length]).toEqual([2, 2]);
  });

  it('on a link that is heard has its first reading from its samples', async () => {
    const node = await startNode();
    const { links, told } = started(stationText(node.port, machine('pump-1', 'h')), async () => ({
      id: 0,
      missed: 'overwritten',
    }));
    await node.begin();
    await until(() => links.health()['node-1']?.condition.kind === 'receiving', 'samples');
    const next = stationOf(stationText(node.port, machine('pump-1', 'h') + machine('pump-2', 'v')));
    await links.replan(next, ringSecondsOf(next));
    await sleep(1500);
    expect(told).toEqual([]);
  });
});

describe('a point that its node does not feed', () => {
  it('has a reading that says so at once and at each interval, so that the machine becomes unknown', async () => {
    const node = await startNode();
    const outcome = async () => ({ id: 0, missed: 'overwritten' });
    const { links, told } = started(stationText(node.port, machine('pump-1', 'x')), outcome);
    await node.begin();
    await until(() => told.length > 0, 'the first word');
    links.tick(0.6);
    expect(told).toHaveLength(1);
    links.tick(0.6);
    links.tick(1);
    expect(told.map(({ elapsedS }) => elapsedS)).toEqual([null, 1.2, 1]);
    for (const { reading } of told) expect(reading.why).toEqual(['channel x is not among h, v']);
  });

  it('even where its rate is too low for any plan', async () => {
    const channels = [{ name: 'h', unit: 'g' as const, scale: 2 ** -12 }];
    const slow = {
      node: 7,
      rateHz: 20,
      format: 'i16' as const,
      channels,
      serialNumber: 'A1',
      firmware: '0.9',
    };
    const node = await TcpNode.start(slow, () => 0, 8);
    cleanups.push(() => node.stop());
    const outcome = async () => ({ id: 0, missed: 'overwritten' });
    const { told } = started(stationText(node.port, machine('pump-1', 'h')), outcome);
    await node.begin();
    const why = /a rate of 20 Hz carries 7.813 Hz, too little for a velocity/;
    const last = () => told.at(-1)?.reading;
    await until(() => why.test(last()?.why[0] ?? ''), 'a word on its rate');
    expect(last()).toMatchObject({ quality: 'bad', running: null, rate: { hz: 20 } });
  });
});

describe('measuring that breaks', () => {
  it('gives a bad reading of the record, with the reason', async () => {
    const node = await startNode();
    const { told } = started(stationText(node.port, machine('pump-1', 'h')), async () => ({
      id: 0,
      missed: 'failed: no such plan',
      failed: true,
    }));
    await node.begin();
    await until(() => told.length >= 3, 'three records');
    for (const { key, reading } of told)
      expect([key, reading.quality, reading.why]).toEqual([
        'pump-1/h',
        'bad',
        ['measuring failed: no such plan'],
      ]);
    const [first, second] = told;
    expect(second!.reading.first_index - first!.reading.first_index).toBe(rateHz);
    expect(second!.elapsedS).toBeCloseTo(1, 1);
  });

  it('is told by the worker as such, and counted', async () => {
    const built = new URL('../../dist/station/measuring-room.js', import.meta.url).href;
    const { MeasuringRoom } = (await import(built)) as typeof import('../../src/station/measuring-room.ts');
    const room = new MeasuringRoom(
      { points: [], mainsHz: 50 },
      { workerLost: () => undefined, workerBack: () => undefined },
    );
    cleanups.push(() => room.stop());
    const ring = new RingWriter(1, 1000);
    ring.beginEpoch(1, 0);
    ring.append(new Int32Array(500), 500, 500);
    room.addRing('node-1', ring.memory);
    const span = { link: 'node-1', epoch: 1, channel: 0, first: 0, samples: 500 };
    const job = { pointKey: 'pump-9/x', span, tachometer: null } as Omit<MeasureJob, 'id'>;
    const outcome = await room.measure(job);
    expect(outcome).toMatchObject({ missed: 'failed: no point pump-9/x', failed: true });
    expect(room.missed).toEqual({ 'failed: no point pump-9/x': 1 });
  });
});
