/** What a configuration that comes with a start or a reload means for the alarms that stood before it. */

import { regroup } from './group.ts';
import type { StepWork } from './work.ts';

/** No point is left under an alarm of its machine that has gone. */
export function settle(work: StepWork): void {
  const grouped = Object.keys(work.before.alarms).filter((key) => work.alarm(key).suppressedBy === 'group');
  regroup(
    work,
    grouped.map((key) => work.plan.alarms.get(key)!),
  );
}
