/** A configuration that comes while the agent runs: what it may change, and that no sample of a kept link is lost. */
import { describe, expect, it } from 'vitest';
import type { AlarmInput } from '../../src/alarm/effects.ts';
import { EMPTY_STATE, replanAlarms, stepAlarms } from '../../src/alarm/engine.ts';
import { planAlarms } from '../../src/alarm/plan.ts';
import { parseStation } from '../../src/config/load.ts';
import type { Station } from '../../src/config/station.ts';
import type { NodeDescription } from '../../src/link/description.ts';
import { needsRestart, sameUplink } from '../../src/station/reload.ts';
import { type DueRecord, LinkSampling } from '../../src/station/sampling.ts';
import { ToldValues } from '../../src/station/told.ts';
import { stationText } from '../support/fault-station.ts';
import { nodeRateHz } from '../support/replug.ts';

function stationOf(text: string): Station {
  const parsed = parseStation(text.replaceAll('FOLDER', '/somewhere'), {
    file: 'station.yaml',
    baseDir: '/nowhere',
  });
  if ('errors' in parsed) throw new Error(JSON.stringify(parsed.errors));
  return parsed.station;
}

const usual = stationOf(stationText(1883));

describe('what needs a restart', () => {
  it.each([
    ['site.id', stationText(1883).replace('test-weir,', 'other-weir,')],
    ['storage.directory', stationText(1883, { storage: '{directory: /elsewhere}' })],
    ['storage.max_mb', stationText(1883, { storage: '{directory: FOLDER/state, max_mb: 64}' })],
  ])('%s', (key, text) => {
    expect(needsRestart(usual, stationOf(text))).toContain(key);
  });

  it('nothing else does', () => {
    const more = '  - {id: node-3, tcp: {host: 127.0.0.1, port: 9}}\n';
    expect(
      needsRestart(usual, stationOf(stationText(1884, { alertMmS: 2, moreLinks: more, everyS: 2 }))),
    ).toBeNull();
  });
});

describe('the connection to the broker', () => {
  it('stays where broker, asks and told topics stay', () => {
    expect(sameUplink(usual, stationOf(stationText(1883, { alertMmS: 2 })))).toBe(true);
  });

  it.each([
    ['another port', stationText(1884)],
    ['fewer asks', stationText(1883).replace('asks: [readings, acknowledge', 'asks: [acknowledge')],
    [
      'a topic that tells a speed',
      stationText(1883).replace('start_delay_s: 0', 'start_delay_s: 0\n    shaft: {mqtt: plc/speed}'),
    ],
  ])('does not with %s', (_what, text) => {
    expect(sameUplink(usual, stationOf(text))).toBe(false);
  });
});

const description: NodeDescription = {
  node: 1,
  serialNumber: 'A1',
  firmware: '1',
  nominalRateHz: nodeRateHz,
  channels: ['x', 'y'].map((name) => ({ name, unit: 'g', unitsPerCount: 1, countRange: null })),
};

function sampling(station: Station): { link: LinkSampling; due: DueRecord[] } {
  const due: DueRecord[] = [];
  const link = new LinkSampling('node-1', station, 20, new ToldValues([], () => 0), {
    rate: () => null,
    wallMs: () => 0,
    due: (record) => due.push(record),
    standing: () => null,
  });
  link.begin({ epoch: 1, firstIndex: 0, description, memory: new SharedArrayBuffer(0), because: 'first' });
  return { link, due };
}

it('a link says when its newest sample came', () => {
  let wallMs = 1000;
  const link = new LinkSampling('node-1', usual, 20, new ToldValues([], () => 0), {
    rate: () => null,
    wallMs: () => wallMs,
    due: () => undefined,
    standing: () => null,
  });
  link.begin({ epoch: 1, firstIndex: 0, description, memory: new SharedArrayBuffer(0), because: 'first' });
  wallMs = 5000;
  link.advance(100);
  wallMs = 60_000;
  link.replan(usual);
  expect(link.standing).toMatchObject({ head: 100, headMs: 5000 });
});

describe('a link that is kept', () => {
  const firsts = (due: readonly DueRecord[], key: string) =>
    due.filter(({ point }) => point.key === key).map(({ job }) => job.span.first);

  it('has the same records as without the change, wherever that comes', () => {
    for (let at = 100; at < 6 * nodeRateHz; at += 1777) {
      const plain = sampling(usual);
      const changed = sampling(usual);
      for (let head = 0; head < 8 * nodeRateHz; head += 333) {
        plain.link.advance(head);
        changed.link.advance(head);
        if (head <= at && at < head + 333) changed.link.replan(stationOf(stationText(1883, { alertMmS: 2 })));
      }
      for (const key of ['m1/p', 'm2/p']) {
        expect(firsts(changed.due, key)).toEqual(firsts(plain.due, key));
        expect(firsts(plain.due, key).length).toBeGreaterThan(5);
      }
      expect(changed.due.map(({ elapsedS }) => elapsedS)).toEqual(plain.due.map(({ elapsedS }) => elapsedS));
    }
  });

  it('cuts the next record where the last one let off, when it is to be measured otherwise', () => {
    const { link, due } = sampling(usual);
    link.advance(Math.round(3.5 * nodeRateHz));
    const before = firsts(due, 'm1/p');
    link.replan(stationOf(stationText(1883, { everyS: 2 })));
    link.advance(9 * nodeRateHz);
    const after = firsts(due, 'm1/p').slice(before.length);
    // Records begin at multiples of the new interval, the first of them not before the old records end.
    expect(after[0]).toBe(Math.ceil((before.at(-1)! + nodeRateHz) / (2 * nodeRateHz)) * 2 * nodeRateHz);
    expect(after[1]! - after[0]!).toBe(2 * nodeRateHz);
  });

  it('feeds a point that is new, and forgets one that has gone', () => {
    const fewer = stationOf(stationText(1883).replace(/ {2}- id: m2[\s\S]*?(?= {2}- id: m3)/, ''));
    const { link, due } = sampling(fewer);
    link.advance(2 * nodeRateHz);
    expect(firsts(due, 'm2/p')).toEqual([]);
    link.replan(usual);
    link.advance(5 * nodeRateHz);
    expect(firsts(due, 'm2/p')[0]).toBe(2 * nodeRateHz);
    const count = firsts(due, 'm2/p').length;
    link.replan(fewer);
    link.advance(9 * nodeRateHz);
    expect(firsts(due, 'm2/p')).toHaveLength(count);
  });
});

describe('alarms under another plan', () => {
  let n = 0;
  const nextId = () => `store0-${++n}`;
  const t = '2026-03-02T10:15:30.000Z';
  const linkLost: AlarmInput = {
    kind: 'link',
    link: 'node-2',
    conditions: ['foreign-node'],
    detail: 'another one',
    t,
  };

  it('keep their state where they stay, and are withdrawn where they leave', () => {
    const { state } = stepAlarms(planAlarms(usual), EMPTY_STATE, linkLost, nextId);
    const key = 'agent/node-2.foreign-node';
    expect(state.alarms[key]?.life.state).toBe('unacknowledged');
    const same = replanAlarms(planAlarms(stationOf(stationText(1883, { alertMmS: 2 }))), state, t, nextId);
    expect(same.effects).toEqual([]);
    expect(same.state).toEqual(state);
    const text = stationText(1883)
      .replace(/ {2}- id: node-2[\s\S]*?(?=machines:)/, '')
      .replace(/ {2}- id: m3[\s\S]*?(?=alarms:)/, '');
    const without = replanAlarms(planAlarms(stationOf(text)), state, t, nextId);
    expect(without.state.alarms[key]).toBeUndefined();
    expect(without.effects).toContainEqual({ kind: 'withdraw', topic: 'agent/alarm/node-2.foreign-node' });
    expect(without.effects).toContainEqual({ kind: 'row', key: `alarm:${key}`, row: null, urgent: true });
  });

  it('make a machine unknown that comes on a link whose alarm stands, once the link is told again', () => {
    const text = stationText(1883).replace(/ {2}- id: m4[\s\S]*?(?=alarms:)/, '');
    const { state } = stepAlarms(planAlarms(stationOf(text)), EMPTY_STATE, linkLost, nextId);
    const more = planAlarms(usual);
    const { effects } = stepAlarms(more, replanAlarms(more, state, t, nextId).state, linkLost, nextId);
    const published = effects.flatMap((effect) =>
      effect.kind === 'publish' && effect.class === 'state' ? [[effect.topic, effect.payload.severity]] : [],
    );
    expect(published).toEqual([['m4/state', 3]]);
  });
});
