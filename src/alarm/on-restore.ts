/** What a configuration that comes with a start or a reload means for the alarms that stood before it. */

import { changeAlarm } from './change.ts';
import type { AlarmEffect, AllocateId } from './effects.ts';
import { regroup } from './group.ts';
import { NORMAL } from './life-cycle.ts';
import { alarmPayload } from './payload.ts';
import type { AlarmDefinition } from './plan.ts';
import type { AlarmRow } from './state.ts';
import { leftReason, operatorReason } from './texts.ts';
import type { StepWork } from './work.ts';

/** The journal's last word on an alarm that leaves while it is not normal; none where it is. */
export function journalLeft(key: string, row: AlarmRow, t: string, allocateId: AllocateId): AlarmEffect[] {
  const { life, facts } = row;
  if (life.state === 'normal' || facts === null) return [];
  const id = allocateId();
  const left = { ...row, life: NORMAL, test: null, facts: { ...facts, t, reason: leftReason } };
  const payload = alarmPayload(left, id, t);
  return [{ kind: 'journal', entry: { kind: 'alarm', id, t, key, payload, reading: null } }];
}

/** What is new takes part in what holds already; no point is left under an alarm of its machine that has gone. */
export function settle(work: StepWork): void {
  for (const { point, machine } of work.plan.points.values()) {
    const { service } = work.machine(machine.id);
    if (service !== null && work.before.points[point.key] === undefined)
      work.setPoint(point.key, { ...work.point(point.key), service }, true);
  }
  for (const alarm of work.plan.alarms.values()) {
    if (work.before.alarms[alarm.key] === undefined) takeOut(work, alarm);
  }
  const grouped = Object.keys(work.before.alarms).filter((key) => work.alarm(key).suppressedBy === 'group');
  regroup(
    work,
    grouped.map((key) => work.plan.alarms.get(key)!),
  );
}

/** A new alarm of what is out of service is out of service as well. */
function takeOut(work: StepWork, alarm: AlarmDefinition): void {
  if (alarm.kind === 'agent') return;
  const { service } = alarm.kind === 'group' ? work.machine(alarm.machine.id) : work.point(alarm.point.key);
  if (service === null) return;
  const reason = operatorReason['out-of-service'](service.by, service.why);
  changeAlarm(work, alarm, [{ kind: 'withhold', why: 'out-of-service' }], { reason }, { patch: { service } });
}
