import { describe, expect, test } from 'vitest';
import type { AlarmEffect } from '../../src/alarm/effects.ts';
import type { AlarmPayload } from '../../src/alarm/payload.ts';
import {
  alarmsIn,
  Bench,
  brief,
  journalIn,
  makeMachine,
  makePoint,
  makeStation,
  onePoint,
  sensorRule,
  statesIn,
  zoneRule,
} from './support.ts';

/** `machines` pumps with `points` points each, every machine on a node of its own. */
function many(
  machines: number,
  points: number,
  rule = zoneRule,
): { bench: Bench; all: (mmS: number) => Record<string, { mmS: number }> } {
  const ids = Array.from({ length: machines }, (_, m) => `pump-${m + 1}`);
  const made = ids.map((id, m) =>
    makeMachine(
      id,
      Array.from({ length: points }, (_, p) => makePoint(id, `p${p + 1}`, `node-${m + 1}`)),
    ),
  );
  const bench = new Bench(makeStation(made, [rule, sensorRule]));
  const all = (mmS: number) => Object.fromEntries([...bench.plan.points.keys()].map((key) => [key, { mmS }]));
  return { bench, all };
}

interface Sent {
  s: number;
  machine: string;
  topic: string;
  alarm: AlarmPayload | null;
}

/** What a subscriber sees, with the second of each. */
class Watcher {
  readonly sent: Sent[] = [];
  see(s: number, effects: readonly AlarmEffect[]): void {
    for (const effect of effects) {
      if (effect.kind !== 'publish' || effect.class === 'finding') continue;
      const alarm = effect.class === 'alarm' ? effect.payload : null;
      this.sent.push({ s, machine: effect.topic.split('/')[0]!, topic: effect.topic, alarm });
    }
  }
  /** The most that fell into any window of so many seconds. */
  most(windowS: number, of: (sent: Sent) => boolean): number {
    const times = this.sent.filter(of).map(({ s }) => s);
    return Math.max(0, ...times.map((from) => times.filter((s) => s >= from && s < from + windowS).length));
  }
  /** Messages that ask for an acknowledgement which was not asked for before. */
  announcements(): Sent[] {
    const seen = new Set<string>();
    return this.sent.filter(({ topic, alarm }) => {
      if (alarm?.state !== 'unacknowledged') return false;
      const key = `${topic} ${alarm.raised}`;
      return !seen.has(key) && seen.add(key);
    });
  }
}

describe('one cause, one alarm', () => {
  test('eight points over the limit at once: two of their own, one of the machine, the rest under it', () => {
    const { bench, all } = many(1, 8);
    for (let i = 0; i < 4; i++) bench.read(all(5));
    const states = Object.values(bench.state.alarms).map(({ life }) => life.state);
    expect(states.filter((state) => state === 'unacknowledged')).toHaveLength(3);
    expect(states.filter((state) => state === 'suppressed-by-design')).toHaveLength(6);
    expect(bench.state.alarms['pump-1/machine.zone']!.facts!.reason).toMatch(
      /^8 points of Pump pump-1 .*p1, .*p8$/,
    );
    for (let i = 0; i < 7; i++) bench.read(all(5));
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 1, unacknowledged: 3, worst: 'p1' });
  });

  test('more points joining are no new announcement, danger is one, and all returns', () => {
    const { bench, all } = many(1, 8);
    const only = (n: number, mmS: number) =>
      Object.fromEntries(Object.keys(all(0)).map((key, i) => [key, { mmS: i < n ? mmS : 1 }]));
    const group = () => bench.state.alarms['pump-1/machine.zone']?.raised ?? null;
    for (let i = 0; i < 4; i++) bench.read(only(2, 5));
    expect(group()).toBeNull();
    for (let i = 0; i < 4; i++) bench.read(only(3, 5));
    const first = group();
    expect(first).not.toBeNull();
    for (let i = 0; i < 4; i++) bench.read(only(8, 5));
    expect(group()).toBe(first);
    bench.put({ kind: 'acknowledge', alarm: 'pump-1/machine.zone', by: 'ann', t: bench.t });
    expect(bench.lifeOf('pump-1/p1.zone')).toBe('acknowledged');
    for (let i = 0; i < 4; i++) bench.read(only(8, 7));
    expect(group()).not.toBe(first);
    expect(bench.state.alarms['pump-1/machine.zone']!.life).toMatchObject({
      state: 'unacknowledged',
      level: 'danger',
    });
    bench.put({ kind: 'acknowledge', alarm: 'pump-1/machine.zone', by: 'ann', t: bench.t });
    for (let i = 0; i < 8; i++) bench.read(only(0, 0));
    const left = Object.entries(bench.state.alarms).filter(([, { life }]) => life.state !== 'normal');
    expect(left).toEqual([]);
  });

  test('a lost node with twelve channels is one alarm', () => {
    const { bench, all } = many(1, 12);
    for (let i = 0; i < 4; i++) bench.read(all(2));
    bench.put({ kind: 'link', link: 'node-1', conditions: ['silent'], detail: null, t: bench.t });
    for (let i = 0; i < 100; i++) bench.tick(10);
    expect(alarmsIn(bench.effects)).toHaveLength(1);
  });

  test('the hole that a lost node leaves is neither the fault of its sensors nor news', () => {
    const { bench, all } = many(1, 12);
    const hole = Object.fromEntries(
      Object.keys(all(0)).map((key) => [
        key,
        {
          mmS: null,
          why: ['gap: 9000 samples missing', 'flat line: the counts stand still for 9000 samples'],
        },
      ]),
    );
    for (let i = 0; i < 4; i++) bench.read(all(2));
    bench.put({ kind: 'link', link: 'node-1', conditions: ['refused'], detail: null, t: bench.t });
    for (let i = 0; i < 10; i++) bench.tick(10);
    bench.put({ kind: 'link', link: 'node-1', conditions: [], detail: null, t: bench.t });
    for (let i = 0; i < 3; i++) bench.read(hole, 1);
    for (let i = 0; i < 40; i++) bench.read(all(2));
    expect(brief(alarmsIn(bench.effects))).toEqual(['unacknowledged alert', 'returned-unacknowledged alert']);
    // Without a lost node, the same readings are a link that loses samples; and still no sensor's fault.
    for (let i = 0; i < 3; i++) bench.read(hole);
    const told = Object.entries(bench.state.alarms).filter(([, { life }]) => life.state === 'unacknowledged');
    expect(told.map(([key]) => key)).toEqual(['agent/node-1.gaps']);
  });
});

// Limits of the issue: 6 messages a machine a minute, 10 newly unacknowledged a station in 10 minutes
// (ISA-18.2 / IEC 62682: more than 10 in 10 minutes is a flood to one operator, as reproduced).
describe('a flood is impossible', () => {
  const rules = {
    'delays of a careless station': { ...zoneRule, onDelayS: 0, offDelayS: 0, deadband: { pct: 0 } },
    'usual delays': zoneRule,
  };
  test.each(Object.entries(rules))('forty points flapping over the limit at each reading, %s', (_, rule) => {
    for (const tickS of [1, 10]) {
      const { bench, all } = many(5, 8, rule);
      const watcher = new Watcher();
      const total = tickS === 1 ? 700 : 1900;
      for (let s = 0; s < total; s += tickS) {
        watcher.see(s, bench.tick(tickS));
        if (s % 10 !== 0) continue;
        const mmS = (s / 10) % 2 === 0 ? 8 : 2;
        for (const [pointKey, shown] of Object.entries(all(mmS))) {
          watcher.see(s, bench.readOne(pointKey, shown, 10));
        }
      }
      for (const machine of ['pump-1', 'pump-2', 'pump-3', 'pump-4', 'pump-5']) {
        expect(watcher.most(60, (sent) => sent.machine === machine)).toBeLessThanOrEqual(6);
      }
      const announced = new Set(watcher.announcements());
      expect(watcher.most(600, (sent) => announced.has(sent))).toBeLessThanOrEqual(10);
    }
  });

  test('what waited is told in the end, as it then stands, and the journal had it all along', () => {
    const { bench, all } = many(5, 8);
    const watcher = new Watcher();
    const go = (mmS: number, n: number) => {
      for (let i = 0; i < n; i++) watcher.see(bench.seconds, bench.read(all(mmS)));
    };
    go(8, 4);
    const journalled = new Set(journalIn(bench.effects).map(({ key }) => key));
    // 40 points and the group alarm of each machine.
    expect(journalled.size).toBe(45);
    expect(watcher.announcements()).toHaveLength(10);
    go(8, 400);
    const last = new Map(
      watcher.sent.filter(({ alarm }) => alarm !== null).map((sent) => [sent.topic, sent.alarm!]),
    );
    expect(last.size).toBe(45);
    for (const [key, row] of Object.entries(bench.state.alarms)) {
      expect(last.get(bench.plan.alarms.get(key)!.topic)!.state).toBe(row.life.state);
    }
    expect(bench.state.waiting).toEqual([]);
  });

  test('a message just before a tick is as young as the tick can make it', () => {
    const { bench, all } = many(1, 1, { ...zoneRule, onDelayS: 0, offDelayS: 0 });
    const flap = () => [8, 2].flatMap((mmS) => bench.readOne('pump-1/p1', all(mmS)['pump-1/p1']!, 100));
    const sent = (effects: readonly AlarmEffect[]) => effects.filter(({ kind }) => kind === 'publish').length;
    bench.tick(60);
    expect(sent([...flap(), ...flap(), ...flap(), ...flap()])).toBe(6);
    // The last flap may have been a moment ago.
    expect(sent([...bench.tick(61), ...flap()])).toBe(0);
    expect(sent([...bench.tick(60), ...flap()])).toBe(0);
    expect(sent(bench.tick(1))).toBeGreaterThan(0);
  });

  test('what a person asked for is shown at once all the same', () => {
    const { bench, all } = many(1, 8, { ...zoneRule, onDelayS: 0, offDelayS: 0 });
    for (let i = 0; i < 5; i++) bench.read(all(i % 2 === 0 ? 8 : 2), 1);
    expect(bench.state.waiting).not.toEqual([]);
    const told = bench.put({ kind: 'acknowledge', alarm: 'pump-1/p1.zone', by: 'ann', t: bench.t });
    expect(brief(alarmsIn(told, 'pump-1/alarm/p1.zone'))).toEqual(['acknowledged danger']);
  });

  test('the worst is told first', () => {
    const { bench, all } = many(12, 2);
    for (let i = 0; i < 4; i++) bench.read(all(5));
    // Ten alerts are out; fourteen wait. Now one machine turns to danger.
    const shown = all(5);
    shown['pump-12/p1'] = { mmS: 8 };
    shown['pump-12/p2'] = { mmS: 8 };
    const before = bench.effects.length;
    for (let i = 0; i < 62; i++) bench.read(shown);
    const next = alarmsIn(bench.effects.slice(before)).filter(({ state }) => state === 'unacknowledged');
    expect(next[0]).toMatchObject({ level: 'danger' });
  });
});

// Chattering: 3 or more in a minute (ISA-18.2 / IEC 62682, as reproduced; another copy says 10 minutes).
describe('chattering', () => {
  const bare = { ...zoneRule, onDelayS: 0, offDelayS: 0, deadband: { pct: 0 } };

  test('the third announcement within a minute holds the alarm until it has been quiet for a minute', () => {
    const bench = new Bench(onePoint([bare]));
    for (let i = 0; i < 300; i++) bench.read({ mmS: i % 2 === 0 ? 5 : 2 }, 5);
    const journal = journalIn(bench.effects).map(({ payload }) => payload);
    expect(brief(journal)).toEqual([
      'unacknowledged alert',
      'returned-unacknowledged alert',
      'unacknowledged alert',
      'returned-unacknowledged alert',
      'unacknowledged alert',
    ]);
    expect(journal.at(-1)!.reason).toContain('chattering');
    for (let i = 0; i < 13; i++) bench.read({ mmS: 2 }, 5);
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('returned-unacknowledged');
  });

  test('three in more than a minute are not', () => {
    const bench = new Bench(onePoint([bare]));
    for (let i = 0; i < 6; i++) bench.read({ mmS: i % 2 === 0 ? 5 : 2 }, 20);
    expect(journalIn(bench.effects)).toHaveLength(6);
  });

  test('danger is announced while an alert chatters', () => {
    const bench = new Bench(onePoint([bare]));
    for (let i = 0; i < 10; i++) bench.read({ mmS: i % 2 === 0 ? 5 : 2 }, 5);
    const told = journalIn(bench.read({ mmS: 8 }, 5));
    expect(told[0]!.payload).toMatchObject({ state: 'unacknowledged', level: 'danger' });
  });
});

test('a machine whose zone flaps sends its state twice a minute, and leaves room for the alarms', () => {
  const { bench, all } = many(1, 1);
  const watcher = new Watcher();
  for (let s = 0; s < 600; s++) watcher.see(s, bench.read(all(s % 2 === 0 ? 2 : 3), 1));
  expect(watcher.most(60, () => true)).toBe(2);
  expect(watcher.sent.length).toBeGreaterThanOrEqual(20);
  // Then danger: the alarm is not held up by what the state has told, and the lamp follows at once.
  const told = [...Array(45).keys()].flatMap(() => bench.read(all(8), 1));
  expect(brief(alarmsIn(told))).toEqual(['unacknowledged danger']);
  expect(statesIn(told).map(({ severity }) => severity)).toContain(2);
});

test('a stop and a start are told at once, whatever details came before', () => {
  const { bench, all } = many(1, 2);
  const show = (shown: object) => {
    const one = { ...all(1)['pump-1/p1'], ...shown };
    return statesIn(bench.read({ 'pump-1/p1': one, 'pump-1/p2': one }, 2));
  };
  // Zones A, B, A: the two details of this minute are spent.
  for (const mmS of [1, 3, 1, 3]) show({ mmS });
  expect(statesIn(bench.effects)).toHaveLength(2);
  expect(show({ mmS: 0.1, running: false }).map(({ running }) => running)).toEqual([false]);
  for (let i = 0; i < 12; i++) expect(show({ mmS: 0.1, running: false })).toEqual([]);
  expect(show({ mmS: 1 }).map(({ running }) => running)).toEqual([true]);
});

test('an acknowledgement shows in the state at once, and a machine that flaps leaves room for two alarms', () => {
  const { bench, all } = many(1, 1, { ...zoneRule, onDelayS: 0 });
  bench.read(all(2), 1);
  bench.read(all(3), 1);
  bench.read(all(8), 1);
  const told = bench.put({ kind: 'acknowledge', alarm: 'pump-1/p1.zone', by: 'ann', t: bench.t });
  expect(statesIn(told).map(({ unacknowledged }) => unacknowledged)).toEqual([0]);
  const watcher = new Watcher();
  const flapping = many(1, 1);
  for (let s = 0; s < 300; s++) {
    const shown = { mmS: 1, running: s % 2 === 0 };
    watcher.see(s, flapping.bench.read({ 'pump-1/p1': shown }, 1));
  }
  expect(watcher.most(60, () => true)).toBe(4);
});

test('points that stop one after the other are one message', () => {
  const { bench, all } = many(1, 3);
  bench.read(all(1), 2);
  bench.tick(1);
  const before = statesIn(bench.effects).length;
  const stopped = Object.fromEntries(Object.keys(all(1)).map((key) => [key, { mmS: 0.1, running: false }]));
  const told = [...bench.read(stopped, 2), ...bench.tick(1)];
  expect(before).toBe(1);
  expect(statesIn(told).map(({ running, zone }) => [running, zone])).toEqual([[false, null]]);
});
