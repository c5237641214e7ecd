/** The words that reach a control room: facts in them, nobody sent near a machine without a caution, no trip. */

import { expect, test } from 'vitest';
import { agentWords, conditionCheck, sensorWords } from '../../src/alarm/texts.ts';
import { alarmsIn, Bench, onePoint, zoneRule } from './support.ts';

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
