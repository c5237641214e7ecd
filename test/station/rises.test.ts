import { expect, it } from 'vitest';
import type { Rule } from '../../src/config/station.ts';
import { riseInputs } from '../../src/station/rises.ts';
import { localStore } from '../../src/store/local-store.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import { alarmsIn, Bench, brief, onePoint, zoneRule } from '../alarm/support.ts';
import { roomyLimits } from '../support/store.ts';

const day = 86_400;
const rise: Rule = {
  ...zoneRule,
  id: 'trend',
  watch: 'acceleration.rms',
  test: { kind: 'rise', alertPct: 50, dangerPct: null, overDays: 7 },
};

/** Ten days of ten-minute values by run time, labelled by a clock that was wrong for the first half of them. */
async function judged(value: (days: number) => number): Promise<Bench> {
  let nowS = 0;
  const store = localStore(new MemoryStore(roomyLimits, () => nowS));
  await store.open();
  const bench = new Bench(onePoint([zoneRule, rise]));
  for (nowS = 0; nowS < 10 * day; nowS += 600) {
    const wallMs = nowS < 5 * day ? nowS * 1000 : 1.7e12 + nowS * 1000;
    const watch = 'acceleration.rms';
    await store.commit({ trend: [{ point: 'pump-1/de-h', watch, wallMs, value: value(nowS / day) }] });
    await store.commit({ trend: [{ point: 'pump-1/de-h', watch: 'velocity.overall', wallMs, value: 1 }] });
  }
  for await (const input of riseInputs(bench.plan, store, bench.t)) bench.put(input);
  return bench;
}

it('a figure that doubles over a week is told, from what the store kept', async () => {
  const bench = await judged((days) => 0.4 * (1 + Math.max(0, days - 3) / 7));
  const told = alarmsIn(bench.effects, 'pump-1/alarm/de-h.trend');
  expect(brief(told)).toEqual(['unacknowledged alert']);
  expect(told[0]).toMatchObject({ unit: '%', limit: 50 });
  // Twice within the seven days.
  expect(Math.abs(Number(told[0]!.value) - 100)).toBeLessThan(2);
});

it('a step, a steady figure and one that rose before the week are not', async () => {
  for (const value of [
    (days: number) => (days < 6 ? 0.4 : 0.8),
    () => 0.4,
    (days: number) => 0.4 * (1 + Math.min(days, 3) / 3),
  ]) {
    expect(alarmsIn((await judged(value)).effects)).toEqual([]);
  }
});
