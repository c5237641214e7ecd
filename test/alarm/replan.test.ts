/** What another configuration means for alarms that stand, and for what is out of service. */

import { expect, test } from 'vitest';
import type { Rule, Station } from '../../src/config/station.ts';
import {
  alarmsIn,
  Bench,
  journalIn,
  makeMachine,
  makePoint,
  makeStation,
  statesIn,
  zoneRule,
} from './support.ts';

const AT_ONCE = { ...zoneRule, onDelayS: 0, offDelayS: 0 };
const HIGH: Rule = { ...AT_ONCE, id: 'high', test: { kind: 'above', alert: 7, danger: null } };

function stationOf(points: readonly string[], rules: readonly Rule[]): Station {
  const made = points.map((id) => makePoint('pump-1', id, 'node-1'));
  return makeStation([makeMachine('pump-1', made)], rules);
}

function out(bench: Bench, target: string, kind: 'out-of-service' | 'in-service' = 'out-of-service') {
  bench.put({ kind, target, by: 'ann', why: 'repair', t: bench.t });
}

const both = { 'pump-1/a': { mmS: 8 }, 'pump-1/b': { mmS: 8 } };
const wide = stationOf(['a', 'b'], [AT_ONCE, HIGH]);
const ALL = ['a.zone', 'b.zone', 'machine.zone', 'a.high', 'b.high', 'machine.high'];
const statesOf = (bench: Bench, names: readonly string[]) =>
  Object.fromEntries(names.map((name) => [name, bench.lifeOf(`pump-1/${name}`)]));

test('points and rules that come to a machine out of service are out of service, and come back with it', () => {
  const bench = new Bench(stationOf(['a'], [AT_ONCE]));
  bench.read({ 'pump-1/a': { mmS: 1 } });
  out(bench, 'pump-1');
  const effects = bench.reload(wide);
  expect(new Set(journalIn(effects).map(({ key }) => key))).toEqual(
    new Set(ALL.slice(1).map((name) => `pump-1/${name}`)),
  );
  expect(journalIn(effects)[0]!.payload).toMatchObject({
    state: 'out-of-service',
    reason: 'out of service by ann: repair',
  });
  const before = bench.effects.length;
  for (let i = 0; i < 5; i++) bench.read(both);
  const flat = { mmS: null, why: ['flat line: the counts never change'] };
  for (let i = 0; i < 10; i++) bench.read({ ...both, 'pump-1/b': flat });
  expect(alarmsIn(bench.effects.slice(before)).map(({ state }) => state)).not.toContain('unacknowledged');
  expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 0, zone: null });
  out(bench, 'pump-1', 'in-service');
  expect(bench.lifeOf('pump-1/b.high')).toBe('unacknowledged');
});

test('also where the configuration changed while the agent was down', () => {
  const bench = new Bench(stationOf(['a'], [AT_ONCE]));
  bench.read({ 'pump-1/a': { mmS: 1 } });
  out(bench, 'pump-1');
  const later = new Bench(wide);
  Object.assign(later.rows, bench.rows);
  later.restart();
  expect(statesOf(later, ALL)).toEqual(Object.fromEntries(ALL.map((name) => [name, 'out-of-service'])));
  expect(later.restart()).toEqual([]);
});

test('a rule that comes to a point out of service is out of service there, and nowhere else', () => {
  const bench = new Bench(stationOf(['a', 'b'], [AT_ONCE]));
  bench.read(both);
  out(bench, 'pump-1/a');
  bench.reload(wide);
  expect(statesOf(bench, ['a.high', 'b.high', 'machine.high'])).toEqual({
    'a.high': 'out-of-service',
    'b.high': 'normal',
    'machine.high': 'normal',
  });
});

test('a point that was put back into service keeps its new rules in service as well', () => {
  const bench = new Bench(stationOf(['a', 'b'], [AT_ONCE]));
  out(bench, 'pump-1');
  out(bench, 'pump-1/a', 'in-service');
  bench.reload(wide);
  expect(statesOf(bench, ['a.high', 'b.high', 'machine.high'])).toEqual({
    'a.high': 'normal',
    'b.high': 'out-of-service',
    'machine.high': 'out-of-service',
  });
});

test('a machine row of before it was kept there is read all the same', () => {
  const bench = new Bench(wide);
  bench.read(both);
  const { service: _, ...old } = bench.rows['machine:pump-1'] as object as { service: unknown };
  bench.rows['machine:pump-1'] = old as (typeof bench.rows)[string];
  const whole = bench.state;
  expect(bench.restart()).toEqual([]);
  expect(bench.state).toEqual(whole);
});

test('the journal has the last word on an alarm that leaves while it stands', () => {
  const bench = new Bench(stationOf(['a', 'b'], [AT_ONCE]));
  bench.read(both);
  bench.read({ ...both, 'pump-1/b': { mmS: 1 } });
  const { raised } = bench.state.alarms['pump-1/a.zone']!;
  bench.put({ kind: 'acknowledge', alarm: 'pump-1/b.zone', by: 'ann', t: bench.t });
  const effects = bench.reload(stationOf(['a', 'b'], [HIGH]));
  // That of b was normal again.
  expect(journalIn(effects).map(({ key }) => key)).toEqual(['pump-1/a.zone']);
  expect(journalIn(effects)[0]!.payload).toMatchObject({
    state: 'normal',
    level: null,
    raised,
    t: bench.t,
    reason: 'it has left the configuration: nothing is judged by it any more',
  });
  expect(effects).toContainEqual({ kind: 'withdraw', topic: 'pump-1/alarm/a.zone' });
});
