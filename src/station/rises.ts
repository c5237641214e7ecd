/** What `rise` rules judge by: the trend of a figure as the store keeps it, by run time. */

import type { AlarmInput } from '../alarm/effects.ts';
import type { AlarmPlan } from '../alarm/plan.ts';
import type { Store } from '../store/types.ts';

const DAY_S = 86_400;
/** As many as the judgement takes in. */
const MOST_SAMPLES = 200;

/** One input for each alarm of a `rise` rule; one series is held at a time. */
export async function* riseInputs(
  plan: AlarmPlan,
  store: Pick<Store, 'recentTrend'>,
  t: string,
): AsyncGenerator<Extract<AlarmInput, { kind: 'trend' }>> {
  for (const alarm of plan.alarms.values()) {
    if (alarm.kind !== 'point' || alarm.rule.test.kind !== 'rise') continue;
    const trend = await store.recentTrend({
      point: alarm.point.key,
      watch: alarm.rule.watch,
      lastS: alarm.rule.test.overDays * DAY_S,
      points: MOST_SAMPLES,
    });
    const samples = trend.map(({ runS, mean }) => ({ day: runS / DAY_S, value: mean }));
    yield { kind: 'trend', alarm: alarm.key, samples, t };
  }
}
