/** The words that reach a control room: facts in them, nobody sent near a machine without a caution, no trip. */

import { expect, test } from 'vitest';
import { agentWords, conditionCheck, sensorWords } from '../../src/alarm/texts.ts';
import { alarmsIn, Bench, makeMachine, makePoint, makeStation, onePoint, zoneRule } from './support.ts';

const WATCHES = [
  'velocity.overall',
  'envelope.defect',
  'acceleration.rms',
  'orders.1.mm_s',
  'shaft.hz',
  'quality',
];

test('every check that leads to the machine carries the caution and defers to the local procedure', () => {
  for (const watch of WATCHES) {
    for (const level of ['alert', 'danger'] as const) {
      expect(conditionCheck(watch, level)).toMatch(/isolate and lock it by local codes and procedure/);
      expect(conditionCheck(watch, level)).toMatch(/qualified people/);
      expect(conditionCheck(watch, level)).toMatch(/Advice only: no trip may depend on it/);
      expect(conditionCheck(watch, level)).not.toMatch(/trip (it|the)|shut it down|stop the (pump|machine)/i);
    }
  }
  const timing = { onDelayS: 0, offDelayS: 0, readings: [3, 5] } as const;
  expect(sensorWords('flat line', timing).check).toMatch(/local codes and procedure/);
});

test.each(['silent', 'refused', 'foreign-node', 'gaps', 'database', 'disk', 'measuring', 'configuration'])(
  '%s has a reason and a check',
  (condition) => {
    const words = agentWords(condition, null);
    expect(words.reason.length).toBeGreaterThan(20);
    expect(words.check).toMatch(/^[A-Z].*[.?]$/);
  },
);

test.each([
  [
    { kind: 'above', alert: 3, danger: null } as const,
    'velocity overall above 3 mm/s: alert limit of the station file',
  ],
  [
    { kind: 'below', alert: 9, danger: null } as const,
    'velocity overall below 9 mm/s: alert limit of the station file',
  ],
])('%j says what, which limit and whose', (rule, reason) => {
  const bench = new Bench(onePoint([{ ...zoneRule, test: rule, onDelayS: 0 }]));
  expect(alarmsIn(bench.read({ mmS: 5 }))[0]!.reason).toBe(reason);
});

const limits = { kind: 'above', alert: 2.8, danger: 4.5 } as const;
const over = 'danger is over: velocity overall back within 4.5 mm/s and its deadband for 60 s; ';

// The deadband of 10 % ends at 2.52 and 4.05 mm/s.
test.each([
  [3.5, 'alert stands: above 2.8 mm/s, alert limit of the station file'],
  [2.6, 'alert is held: not above 2.8 mm/s, but still within the deadband of that limit'],
  [2, 'alert is held: no longer above 2.8 mm/s, but not yet clear of its deadband for 60 s'],
])('danger that falls to alert at %d mm/s is told by what holds the alert', (mmS, held) => {
  const bench = new Bench(onePoint([{ ...zoneRule, test: limits, onDelayS: 0 }]));
  bench.read({ mmS: 6 });
  // Danger clears 60 s after the first reading under 4.05 mm/s.
  for (let i = 0; i < 6; i++) bench.read({ mmS: 3.5 });
  const [told] = alarmsIn(bench.read({ mmS }));
  expect(told).toMatchObject({ level: 'alert', value: mmS, limit: 2.8, reason: over + held });
});

test('danger that falls to alert where displacement alone holds it tells the displacement', () => {
  const severity = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;
  const points = [makePoint('pump-1', 'de-h', 'node-1', { severity })];
  const station = makeStation([makeMachine('pump-1', points)], [{ ...zoneRule, onDelayS: 0 }]);
  const bench = new Bench(station);
  bench.read({ mmS: 2, um: 80 });
  // C/D of group 2 rigid is 71 µm, B/C 45 µm (ISO 10816-3:2009 Table A.2); its deadband ends at 40.5 µm.
  for (let i = 0; i < 6; i++) bench.read({ mmS: 2, um: 42 });
  const [told] = alarmsIn(bench.read({ mmS: 2, um: 42 }));
  expect(told).toMatchObject({ level: 'alert', value: 42, limit: 45, unit: 'µm' });
  expect(told!.reason).toBe(
    'danger is over: displacement rms back within 71 µm and its deadband for 60 s; alert is held: not above 45 µm, but still within the deadband of that limit',
  );
});

test('danger that falls to alert by k of n readings says so, whatever the last reading was', () => {
  const rule = { ...zoneRule, test: limits, onDelayS: 0, offDelayS: 0, readings: [2, 3] as const };
  const bench = new Bench(onePoint([rule]));
  // Two of the last three over 4.05 mm/s hold danger; the last reading leaves one.
  for (const mmS of [6, 6, 3, 3]) bench.read({ mmS });
  const [told] = alarmsIn(bench.effects).slice(-1);
  expect(told).toMatchObject({ level: 'alert', value: 3, limit: 2.8 });
  expect(told!.reason).toBe(
    'danger is over: velocity overall no longer above 4.5 mm/s in 2 of the last 3 readings; alert is held: not yet so for 2.8 mm/s',
  );
});

test('a rule for words is told by what it watches', () => {
  const watched = (watch: string, values: string[]) => ({
    ...zoneRule,
    watch,
    test: { kind: 'is', values, level: 'alert' } as const,
    onDelayS: 0,
    offDelayS: 0,
    readings: [3, 5] as const,
  });
  const bench = new Bench(onePoint([watched('zone', ['C'])]));
  for (let i = 0; i < 3; i++) bench.read({ mmS: 5 });
  expect(alarmsIn(bench.effects)[0]!.reason).toBe('zone is C in 3 of the last 5 readings');
  for (let i = 0; i < 3; i++) bench.read({ mmS: 1 });
  expect(alarmsIn(bench.effects)[1]!.reason).toBe('zone no longer C in 3 of the last 5 readings');
  const either = new Bench(onePoint([watched('zone', ['C', 'D'])]));
  for (const mmS of [5, 8, 5]) either.read({ mmS });
  expect(alarmsIn(either.effects)[0]!.reason).toBe('zone is C or D in 3 of the last 5 readings');
});
