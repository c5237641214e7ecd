/** The alarm of a machine speaks for its points, or they speak for themselves: no danger is left without a voice. */

import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { conditionLevel } from '../../src/alarm/condition.ts';
import type { AskInput } from '../../src/alarm/effects.ts';
import {
  alarmsIn,
  Bench,
  brief,
  makeMachine,
  makePoint,
  makeStation,
  statesIn,
  zoneRule,
} from './support.ts';

const AT_ONCE = { ...zoneRule, onDelayS: 0, offDelayS: 0 };

const stationOf = (...ids: string[]) =>
  makeStation(
    [
      makeMachine(
        'pump-1',
        ids.map((id) => makePoint('pump-1', id, 'node-1')),
      ),
    ],
    [AT_ONCE],
  );

/** A reading of each point, `mmS` in the order of a, b, c, so many times. */
function read(bench: Bench, mmS: readonly number[], times = 3) {
  const shown = Object.fromEntries(mmS.map((value, i) => [`pump-1/${'abc'[i]}`, { mmS: value }]));
  return Array.from({ length: times }, () => bench.read(shown)).flat();
}

function service(bench: Bench, kind: 'out-of-service' | 'in-service', target: string) {
  return bench.put({ kind, target, by: 'ann', why: 'repair', t: bench.t });
}

/** Three points in danger; the third is suppressed under the alarm of its machine. */
function grouped(): Bench {
  const bench = new Bench(stationOf('a', 'b', 'c'));
  read(bench, [1, 1, 1]);
  read(bench, [8, 8, 8]);
  expect(livesOf(bench)).toEqual([
    'unacknowledged',
    'unacknowledged',
    'suppressed-by-design',
    'unacknowledged',
  ]);
  return bench;
}

const livesOf = (bench: Bench) => ['a', 'b', 'c', 'machine'].map((id) => bench.lifeOf(`pump-1/${id}.zone`));

const OWN_WORDS =
  'velocity overall stands in danger by rule zone: the alarm of its machine no longer speaks for it';

describe('a point whose machine no longer speaks for it does so itself', () => {
  test('when the machine comes back into service with two of three points repaired', () => {
    const bench = grouped();
    service(bench, 'out-of-service', 'pump-1');
    read(bench, [8, 8, 8]);
    read(bench, [1, 1, 8]);
    const told = service(bench, 'in-service', 'pump-1');
    expect(bench.lifeOf('pump-1/c.zone')).toBe('unacknowledged');
    const later = [...told, ...Array.from({ length: 10 }, () => bench.tick(10)).flat()];
    const [alarm] = alarmsIn(later, 'pump-1/alarm/c.zone');
    expect(alarm).toMatchObject({ state: 'unacknowledged', level: 'danger', value: 8, reason: OWN_WORDS });
    expect(statesIn(later).at(-1)).toMatchObject({ severity: 2, worst: 'c' });
  });

  test('when the shelves run out and only its own condition still holds', () => {
    const bench = grouped();
    for (const id of ['a', 'b', 'c'])
      bench.put({ kind: 'shelve', alarm: `pump-1/${id}.zone`, minutes: 10, by: 'ann', t: bench.t });
    read(bench, [1, 1, 8], 59);
    expect(bench.lifeOf('pump-1/c.zone')).toBe('shelved');
    for (let i = 0; i < 2; i++) bench.tick(10);
    expect(livesOf(bench)).toEqual(['normal', 'normal', 'unacknowledged', 'returned-unacknowledged']);
  });

  test('but not when all three still stand together as the shelves run out', () => {
    const bench = grouped();
    for (const id of ['a', 'b', 'c'])
      bench.put({ kind: 'shelve', alarm: `pump-1/${id}.zone`, minutes: 10, by: 'ann', t: bench.t });
    read(bench, [8, 8, 8], 59);
    for (let i = 0; i < 2; i++) bench.tick(10);
    expect(livesOf(bench)).toEqual([
      'unacknowledged',
      'unacknowledged',
      'suppressed-by-design',
      'unacknowledged',
    ]);
  });

  test('when a reload leaves the machine too few points for an alarm of its own', () => {
    const bench = grouped();
    bench.reload(stationOf('c'));
    expect(bench.lifeOf('pump-1/c.zone')).toBe('unacknowledged');
    const told = Array.from({ length: 10 }, () => bench.tick(10)).flat();
    expect(alarmsIn(told, 'pump-1/alarm/c.zone')[0]).toMatchObject({ level: 'danger', reason: OWN_WORDS });
    expect(statesIn(told).at(-1)).toMatchObject({ severity: 2 });
  });

  test('when it comes off the shelf after such a reload', () => {
    const bench = grouped();
    bench.put({ kind: 'shelve', alarm: 'pump-1/c.zone', minutes: 10, by: 'ann', t: bench.t });
    bench.reload(stationOf('c'));
    expect(bench.lifeOf('pump-1/c.zone')).toBe('shelved');
    bench.put({ kind: 'unshelve', alarm: 'pump-1/c.zone', by: 'ann', t: bench.t });
    expect(bench.lifeOf('pump-1/c.zone')).toBe('unacknowledged');
  });

  test('when the alarm of its machine alone is out of service, also where points join later', () => {
    const bench = grouped();
    service(bench, 'out-of-service', 'pump-1/machine.zone');
    expect(bench.lifeOf('pump-1/c.zone')).toBe('unacknowledged');
    const fresh = new Bench(stationOf('a', 'b', 'c'));
    read(fresh, [1, 1, 1]);
    service(fresh, 'out-of-service', 'pump-1');
    for (const id of ['a', 'b', 'c']) service(fresh, 'in-service', `pump-1/${id}`);
    read(fresh, [8, 8, 8]);
    expect(livesOf(fresh)).toEqual(['unacknowledged', 'unacknowledged', 'unacknowledged', 'out-of-service']);
  });
});

test('the shelf of a machine keeps quiet what it stood for; what is new speaks for itself', () => {
  const bench = new Bench(stationOf('a', 'b', 'c'));
  read(bench, [5, 5, 8]);
  bench.put({ kind: 'shelve', alarm: 'pump-1/machine.zone', minutes: 10, by: 'ann', t: bench.t });
  const before = bench.effects.length;
  read(bench, [5, 5, 8]);
  expect(livesOf(bench)[2]).toBe('suppressed-by-design');
  expect(alarmsIn(bench.effects.slice(before))).toEqual([]);
  expect(brief(alarmsIn(read(bench, [8, 5, 8]), 'pump-1/alarm/a.zone'))).toEqual(['unacknowledged danger']);
});

const IDS = ['a', 'b', 'c', 'd'];
type Act = { readonly what: number; readonly point: number; readonly mmS: number };

function run(bench: Bench, { what, point, mmS }: Act): void {
  const { t } = bench;
  const id = IDS[point]!;
  const by = 'ann';
  const alarm = point === 3 ? 'pump-1/machine.zone' : `pump-1/${id}.zone`;
  const put = (ask: AskInput) => bench.put(ask);
  if (what < 12) {
    if (bench.plan.points.has(`pump-1/${id}`)) bench.readOne(`pump-1/${id}`, { mmS }, 30);
  } else if (what < 14) bench.tick(40);
  else if (what < 16) put({ kind: 'shelve', alarm, minutes: 1, by, t });
  else if (what === 16) put({ kind: 'unshelve', alarm, by, t });
  else if (what === 17) put({ kind: 'acknowledge', alarm, by, t });
  else if (what === 18) put({ kind: 'out-of-service', target: 'pump-1', by, why: 'work', t });
  else if (what === 19) put({ kind: 'in-service', target: 'pump-1', by, why: '', t });
  else if (what === 20) put({ kind: 'out-of-service', target: `pump-1/${id}`, by, why: 'work', t });
  else if (what === 21) put({ kind: 'in-service', target: `pump-1/${id}`, by, why: '', t });
  else if (what === 22)
    put({ kind: mmS > 4 ? 'out-of-service' : 'in-service', target: alarm, by, why: 'x', t });
  else if (what === 23) bench.reload(stationOf(...IDS.slice(point)));
  else bench.reload(stationOf(...IDS));
}

test('whatever was done, a condition that holds is told by its point or its machine, or a person keeps it quiet', () => {
  const act = fc.record({ what: fc.nat(24), point: fc.nat(3), mmS: fc.constantFrom(1, 5, 8, 8) });
  fc.assert(
    fc.property(fc.array(act, { maxLength: 80 }), (acts) => {
      const bench = new Bench(stationOf(...IDS));
      for (const one of acts) {
        run(bench, one);
        for (const id of IDS) {
          const row = bench.state.alarms[`pump-1/${id}.zone`];
          const level = row === undefined ? null : conditionLevel(row.condition);
          if (row === undefined || level === null || row.shelf !== null || row.service !== null) continue;
          const { life } = row.suppressedBy === 'group' ? bench.state.alarms['pump-1/machine.zone']! : row;
          if (life.state === 'shelved' && row.suppressedBy === 'group') continue;
          expect(life).toMatchObject({ state: expect.stringMatching(/^(un)?acknowledged$/) });
          expect('level' in life && (life.level === 'danger' || level === 'alert')).toBe(true);
        }
      }
    }),
    { seed: 6, numRuns: 500 },
  );
});
