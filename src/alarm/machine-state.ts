/** The state of a machine in one message, for the simplest of screens. */

import type { Machine } from '../config/station.ts';
import { standingLevel } from './life-cycle.ts';
import type { MachineStatePayload } from './payload.ts';
import type { MachineRow } from './state.ts';
import { UNKNOWN_AFTER } from './tracking.ts';
import type { StepWork } from './work.ts';

export type MachineFacts = Omit<MachineStatePayload, 'id' | 't' | 'hours_run'>;

/** Unknown outranks alert, danger outranks unknown. */
const RANK = { 0: 0, 1: 1, 3: 2, 2: 3 } as const;

/**
 * The state of a machine as its rows say. Alarms that are shelved or otherwise withheld do not count. Unknown goes by
 * the readings and the links: the alarm of a sensor stands for its off-delay, while figures are true again at once.
 */
export function machineFacts(work: StepWork, machine: Machine): MachineFacts {
  const row = work.machine(machine.id);
  let severity: 0 | 1 | 2 | 3 = 0;
  let worst: string | null = null;
  const raise = (to: 1 | 2 | 3, point: string) => {
    if (RANK[to] > RANK[severity]) [severity, worst] = [to, point];
  };
  let unacknowledged = 0;
  for (const alarm of work.plan.machines.get(machine.id)!.alarms) {
    if (alarm.kind === 'agent') continue;
    const { life } = work.alarm(alarm.key);
    if (life.state === 'unacknowledged' || life.state === 'returned-unacknowledged') unacknowledged += 1;
    const level = alarm.kind === 'sensor' ? null : standingLevel(life);
    const about = alarm.kind === 'group' ? 'machine' : alarm.point.id;
    if (level !== null) raise(level === 'danger' ? 2 : 1, about);
  }
  const zones = machine.points.map((point) => ({ point, row: work.point(point.key) }));
  for (const { point, row: at } of zones) {
    if (at.service === null && at.invalid >= UNKNOWN_AFTER) raise(3, point.id);
  }
  const zoned = zones.filter(({ row: at }) => at.zone !== null && at.service === null);
  const highest = zoned.reduce<(typeof zoned)[number] | null>(
    (best, at) => (best === null || at.row.zone! > best.row.zone! ? at : best),
    null,
  );
  return {
    running: row.running,
    since: row.since,
    starts_today: row.starts,
    severity,
    zone: highest?.row.zone ?? null,
    worst: worst ?? highest?.point.id ?? null,
    unacknowledged,
    finding: row.findings.standing[0]?.fault ?? null,
  };
}

export function machinePayload(
  facts: MachineFacts,
  row: MachineRow,
  id: string,
  t: string,
): MachineStatePayload {
  const { running, since, starts_today, ...rest } = facts;
  const hours_run = Math.round(row.runS / 360) / 10;
  return { id, t, running, since, hours_run, starts_today, ...rest };
}
