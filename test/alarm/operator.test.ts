import { describe, expect, test } from 'vitest';
import type { AlarmEffect, AskInput } from '../../src/alarm/effects.ts';
import {
  alarmsIn,
  Bench,
  brief,
  journalIn,
  makeMachine,
  makePoint,
  makeStation,
  onePoint,
  statesIn,
} from './support.ts';

const KEY = 'pump-1/de-h.zone';

/** An ask without its label. */
type Ask = AskInput extends infer A ? (A extends AskInput ? Omit<A, 't'> : never) : never;

function ask(bench: Bench, what: Ask): readonly AlarmEffect[] {
  return bench.put({ ...what, t: bench.t } as AskInput);
}

function answer(effects: readonly AlarmEffect[]): string | true {
  const found = effects.filter((effect) => effect.kind === 'answer');
  expect(found).toHaveLength(1);
  return found[0]!.ok || found[0]!.error;
}

function raisedBench(mmS = 5): Bench {
  const bench = new Bench(onePoint());
  for (let i = 0; i < 4; i++) bench.read({ mmS });
  expect(bench.lifeOf(KEY)).toBe('unacknowledged');
  return bench;
}

describe('acknowledge', () => {
  test('says by whom, keeps what it stood for, and is journalled', () => {
    const bench = raisedBench();
    const [alarm] = alarmsIn(bench.effects);
    const effects = ask(bench, { kind: 'acknowledge', alarm: KEY, raised: alarm!.raised!, by: 'ann' });
    expect(answer(effects)).toBe(true);
    expect(alarmsIn(effects)[0]).toMatchObject({
      state: 'acknowledged',
      level: 'alert',
      acknowledged_by: 'ann',
      raised: alarm!.raised,
      value: 5,
      since: alarm!.since,
    });
    expect(journalIn(effects)[0]!.payload.acknowledged_by).toBe('ann');
    for (let i = 0; i < 8; i++) bench.read({ mmS: 1 });
    expect(brief(alarmsIn(bench.effects).slice(-1))).toEqual(['normal null']);
  });

  test('is refused where it was raised anew since, and changes nothing', () => {
    const bench = raisedBench();
    const first = alarmsIn(bench.effects)[0]!.raised!;
    for (let i = 0; i < 4; i++) bench.read({ mmS: 7 });
    const before = bench.state;
    expect(answer(ask(bench, { kind: 'acknowledge', alarm: KEY, raised: first, by: 'ann' }))).toMatch(
      /raised anew/,
    );
    expect(bench.state).toEqual(before);
  });

  test.each<[Ask, RegExp]>([
    [{ kind: 'acknowledge', alarm: 'pump-1/de-h.nothing', by: 'ann' }, /no alarm/],
    [
      { kind: 'acknowledge', alarm: 'pump-1/de-h.bearing', by: 'ann' },
      /nothing to acknowledge: the alarm is normal/,
    ],
    [{ kind: 'acknowledge', alarm: KEY, by: ' ' }, /who asks/],
    [{ kind: 'shelve', alarm: KEY, by: 'ann', minutes: 0 }, /1 to 1440/],
    [{ kind: 'shelve', alarm: KEY, by: 'ann', minutes: Number.NaN }, /1 to 1440/],
    [{ kind: 'shelve', alarm: KEY, by: 'ann', minutes: 1441 }, /1 to 1440/],
    [{ kind: 'unshelve', alarm: KEY, by: 'ann' }, /not on the shelf/],
    [{ kind: 'out-of-service', target: 'pump-7', by: 'ann', why: 'x' }, /no alarm, point or machine/],
    [{ kind: 'out-of-service', target: KEY, by: 'ann', why: '' }, /for what reason/],
    [{ kind: 'reset', alarm: KEY, by: 'ann' }, /nothing to reset/],
    [{ kind: 'acknowledge', alarm: 'constructor', by: 'ann' }, /no alarm/],
  ])('%j is refused', (what, reason) => {
    const bench = raisedBench();
    const before = bench.state;
    expect(answer(ask(bench, what))).toMatch(reason);
    expect(bench.state).toEqual(before);
  });
});

describe('shelve', () => {
  test('comes back by itself: to unacknowledged where the condition holds', () => {
    const bench = raisedBench();
    ask(bench, { kind: 'shelve', alarm: KEY, minutes: 10, by: 'ann' });
    expect(brief(alarmsIn(bench.effects).slice(-1))).toEqual(['shelved alert']);
    for (let i = 0; i < 59; i++) bench.read({ mmS: 5 });
    expect(bench.lifeOf(KEY)).toBe('shelved');
    const back = alarmsIn(bench.read({ mmS: 5 }));
    expect(brief(back)).toEqual(['unacknowledged alert']);
    expect(back[0]!.raised).toBe(back[0]!.id);
    expect(back[0]!.reason).toContain('its time on the shelf is over');
  });

  test('to normal where the condition passed meanwhile', () => {
    const bench = raisedBench();
    ask(bench, { kind: 'shelve', alarm: KEY, minutes: 10, by: 'ann' });
    for (let i = 0; i < 60; i++) bench.read({ mmS: 1 });
    expect(brief(alarmsIn(bench.effects)).at(-1)).toBe('normal null');
  });

  test('a power cut neither ends nor lengthens it', () => {
    const bench = raisedBench();
    ask(bench, { kind: 'shelve', alarm: KEY, minutes: 10, by: 'ann' });
    for (let i = 0; i < 30; i++) bench.tick(10);
    bench.seconds += 1e6;
    bench.restart();
    for (let i = 0; i < 29; i++) bench.tick(10);
    expect(bench.lifeOf(KEY)).toBe('shelved');
    bench.tick(10);
    expect(bench.lifeOf(KEY)).toBe('unacknowledged');
  });

  test('taken down early, and shelved for longer', () => {
    const bench = raisedBench();
    ask(bench, { kind: 'shelve', alarm: KEY, minutes: 1, by: 'ann' });
    ask(bench, { kind: 'shelve', alarm: KEY, minutes: 60, by: 'bob' });
    bench.tick(600);
    expect(bench.lifeOf(KEY)).toBe('shelved');
    expect(answer(ask(bench, { kind: 'unshelve', alarm: KEY, by: 'bob' }))).toBe(true);
    expect(bench.lifeOf(KEY)).toBe('unacknowledged');
  });
});

describe('out of service', () => {
  const two = () => {
    const points = ['h', 'v'].map((id) => makePoint('pump-1', id, 'node-1'));
    return new Bench(makeStation([makeMachine('pump-1', points)]));
  };
  test.each([
    ['pump-1/h.zone', ['pump-1/h.zone']],
    ['pump-1/h', ['pump-1/h.zone', 'pump-1/h.bearing', 'pump-1/h.sensor']],
    [
      'pump-1',
      [
        'pump-1/h.zone',
        'pump-1/h.bearing',
        'pump-1/h.sensor',
        'pump-1/v.zone',
        'pump-1/v.bearing',
        'pump-1/v.sensor',
        'pump-1/machine.zone',
        'pump-1/machine.bearing',
      ],
    ],
  ])('%s takes out %j, says who and why, and comes back', (target, keys) => {
    const bench = two();
    const effects = ask(bench, { kind: 'out-of-service', target, by: 'ann', why: 'bearing change' });
    expect(journalIn(effects).map(({ key }) => key)).toEqual(keys);
    expect(journalIn(effects)[0]!.payload.reason).toBe('out of service by ann: bearing change');
    for (let i = 0; i < 5; i++) bench.read({ 'pump-1/h': { mmS: 8 } });
    expect(bench.lifeOf('pump-1/h.zone')).toBe('out-of-service');
    ask(bench, { kind: 'in-service', target, by: 'ann', why: '' });
    expect(bench.lifeOf('pump-1/h.zone')).toBe('unacknowledged');
    expect(keys.filter((key) => key !== 'pump-1/h.zone').map((key) => bench.lifeOf(key))).toEqual(
      keys.slice(1).map(() => 'normal'),
    );
  });

  test('a dead sensor that is out of service does not make the machine unknown', () => {
    const bench = two();
    ask(bench, { kind: 'out-of-service', target: 'pump-1/h', by: 'ann', why: 'cable cut' });
    const dead = { mmS: null, why: ['flat line: the counts never change'] };
    for (let i = 0; i < 5; i++) bench.read({ 'pump-1/h': dead, 'pump-1/v': { mmS: 2 } });
    expect(statesIn(bench.effects).at(-1)!.severity).toBe(0);
  });
});

describe('test alarm', () => {
  test('is marked, shows no severity, and ends at the acknowledgement', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 1 });
    const [told] = alarmsIn(ask(bench, { kind: 'test', alarm: KEY, level: 'danger' }));
    expect(told).toMatchObject({ state: 'unacknowledged', level: 'danger', test: true, raised: told!.id });
    expect(statesIn(bench.effects).at(-1)!.severity).toBe(0);
    const [after] = alarmsIn(ask(bench, { kind: 'acknowledge', alarm: KEY, raised: told!.id, by: 'ann' }));
    expect(after).toMatchObject({ state: 'normal', level: null });
    expect(after).not.toHaveProperty('test');
  });

  test('ends by itself after five minutes, or at a true change, and leaves a standing alarm as it was', () => {
    const bench = raisedBench();
    ask(bench, { kind: 'test', alarm: KEY, level: 'alert' });
    for (let i = 0; i < 29; i++) expect(alarmsIn(bench.tick(10))).toEqual([]);
    expect(brief(alarmsIn(bench.tick(10)))).toEqual(['unacknowledged alert']);
    ask(bench, { kind: 'test', alarm: KEY, level: 'alert' });
    const told = [1, 2, 3, 4].flatMap(() => alarmsIn(bench.read({ mmS: 7 })));
    expect(brief(told)).toEqual(['unacknowledged danger']);
    expect(told[0]).not.toHaveProperty('test');
  });
});

test('a test alarm under way as the shelf runs out does not hide the alarm that comes back', () => {
  const bench = raisedBench(8);
  ask(bench, { kind: 'shelve', alarm: KEY, minutes: 5, by: 'ann' });
  for (let i = 0; i < 27; i++) bench.read({ mmS: 8 });
  ask(bench, { kind: 'test', alarm: KEY, level: 'alert' });
  const told = Array.from({ length: 4 }, () =>
    alarmsIn(bench.read({ mmS: 8 }), 'pump-1/alarm/de-h.zone'),
  ).flat();
  expect(brief(told)).toEqual(['unacknowledged danger']);
  expect(told[0]).not.toHaveProperty('test');
  expect(bench.state.alarms[KEY]!.test).toBeNull();
});

describe('restart in each state', () => {
  const reach: Record<string, (bench: Bench) => void> = {
    normal: () => undefined,
    'normal, delay running': (bench) => {
      bench.read({ mmS: 5 });
      bench.read({ mmS: 5 });
    },
    unacknowledged: (bench) => {
      for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
    },
    acknowledged: (bench) => {
      for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
      ask(bench, { kind: 'acknowledge', alarm: KEY, by: 'ann' });
    },
    'returned-unacknowledged': (bench) => {
      for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
      for (let i = 0; i < 7; i++) bench.read({ mmS: 1 });
    },
    shelved: (bench) => ask(bench, { kind: 'shelve', alarm: KEY, minutes: 30, by: 'ann' }),
    'suppressed-by-design': (bench) => {
      for (let i = 0; i < 361; i++) bench.read({ mmS: 0, running: false });
    },
    'out-of-service': (bench) => ask(bench, { kind: 'out-of-service', target: KEY, by: 'ann', why: 'work' }),
    'a test': (bench) => ask(bench, { kind: 'test', alarm: KEY, level: 'alert' }),
  };

  test.each(Object.keys(reach))('%s: nothing is told twice, nothing forgotten', (name) => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 1 });
    reach[name]!(bench);
    const whole = bench.state;
    expect(bench.restart()).toEqual([]);
    expect(bench.state).toEqual(whole);
    const twin = new Bench(onePoint());
    twin.read({ mmS: 1 });
    reach[name]!(twin);
    // From here on it does what it would have done without the power cut.
    const go = (b: Bench) =>
      [5, 5, 5, 5, 1, 1, 1, 1, 1, 1, 1, 1].flatMap((mmS) => brief(alarmsIn(b.read({ mmS }))));
    expect(go(bench)).toEqual(go(twin));
  });

  test('a condition that cleared meanwhile is told', () => {
    const bench = raisedBench();
    bench.restart();
    const told = [null, 10, 10, 10, 10, 10, 10].flatMap((s) => brief(alarmsIn(bench.read({ mmS: 1 }, s))));
    expect(told).toEqual(['returned-unacknowledged alert']);
  });

  test('what was not told before the power cut is told after it', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 1 });
    for (let i = 0; i < 6; i++) bench.put({ kind: 'test', alarm: KEY, level: 'alert', t: bench.t });
    for (let i = 0; i < 3; i++) bench.read({ defect: 'outer' }, 1);
    expect(bench.lifeOf('pump-1/de-h.bearing')).toBe('unacknowledged');
    expect(alarmsIn(bench.effects, 'pump-1/alarm/de-h.bearing')).toEqual([]);
    const { waiting } = bench.state;
    bench.restart();
    expect(new Set(bench.state.waiting)).toEqual(new Set(waiting));
    const later = Array.from({ length: 13 }, () => bench.tick(10)).flat();
    expect(brief(alarmsIn(later, 'pump-1/alarm/de-h.bearing'))).toEqual(['unacknowledged alert']);
  });

  test('what left the configuration is forgotten and its topics emptied', () => {
    const bench = raisedBench();
    const fewer = new Bench(makeStation([makeMachine('pump-2', [makePoint('pump-2', 'de-h', 'node-1')])]));
    Object.assign(fewer.rows, bench.rows);
    const withdrawn = fewer.restart().flatMap((e) => (e.kind === 'withdraw' ? [e.topic] : []));
    expect(new Set(withdrawn)).toEqual(new Set(['pump-1/alarm/de-h.zone', 'pump-1/state', 'pump-1/finding']));
    expect(fewer.state.alarms).toEqual({});
  });
});
