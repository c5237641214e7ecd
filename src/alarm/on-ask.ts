/** What an operator asks for. Each ask gets one answer; a refused one changes nothing. */

import { changeAlarm, recordChange } from './change.ts';
import type { AskInput } from './effects.ts';
import { membersOf, regroup } from './group.ts';
import type { LifeInput } from './life-cycle.ts';
import type { AlarmDefinition } from './plan.ts';
import type { AlarmRow } from './state.ts';
import { operatorReason, refusal, testOverReason } from './texts.ts';
import type { StepWork } from './work.ts';

const SHELF_MINUTES = [1, 1440] as const;
/** How long a test alarm stands if nobody acknowledges it. */
const TEST_S = 300;

export function onAsk(work: StepWork, ask: AskInput): void {
  const error = 'target' in ask ? serviceAsk(work, ask) : alarmAsk(work, ask);
  work.effects.push(error === null ? { kind: 'answer', ok: true } : { kind: 'answer', ok: false, error });
}

type ServiceAsk = Extract<AskInput, { target: string }>;
type AlarmAsk = Exclude<AskInput, ServiceAsk>;

function alarmAsk(work: StepWork, ask: AlarmAsk): string | null {
  const alarm = work.plan.alarms.get(ask.alarm);
  if (alarm === undefined) return refusal.unknownAlarm(ask.alarm);
  work.asked.add(alarm.key);
  if (ask.kind !== 'test' && ask.by.trim() === '') return refusal.by;
  switch (ask.kind) {
    case 'acknowledge':
      return acknowledge(work, alarm, ask);
    case 'shelve': {
      if (!(ask.minutes >= SHELF_MINUTES[0] && ask.minutes <= SHELF_MINUTES[1])) return refusal.minutes;
      const shelf = { by: ask.by, leftS: ask.minutes * 60 };
      const words = { reason: operatorReason.shelve(ask.by, ask.minutes) };
      // Shelving again sets a new time, which is a change too.
      const retell = work.alarm(alarm.key).shelf !== null;
      changeAlarm(work, alarm, [{ kind: 'withhold', why: 'shelved' }], words, { patch: { shelf }, retell });
      return null;
    }
    case 'unshelve':
      if (work.alarm(alarm.key).shelf === null) return refusal.notShelved;
      unshelve(work, alarm, operatorReason.unshelve(ask.by));
      regroup(work, [alarm]);
      return null;
    case 'reset':
      return reset(work, alarm, ask.by);
    case 'test':
      return startTest(work, alarm, ask);
  }
}

function acknowledge(
  work: StepWork,
  alarm: AlarmDefinition,
  { raised, by }: Extract<AskInput, { kind: 'acknowledge' }>,
): string | null {
  const row = work.alarm(alarm.key);
  if (row.test !== null && (raised === undefined || raised === row.test.id)) {
    endTest(work, alarm);
    return null;
  }
  const { state } = row.life;
  if (state !== 'unacknowledged' && state !== 'returned-unacknowledged')
    return refusal.nothingToAcknowledge(state);
  if (raised !== undefined && raised !== row.raised) return refusal.raisedAgain(row.raised);
  acknowledgeOne(work, alarm, by);
  if (alarm.kind !== 'group') return null;
  // Whoever takes note of the machine's alarm has taken note of the points that it names.
  for (const member of membersOf(work, alarm)) acknowledgeOne(work, member, by);
  return null;
}

function acknowledgeOne(work: StepWork, alarm: AlarmDefinition, by: string): void {
  const before = work.alarm(alarm.key).acknowledgedBy;
  const input: LifeInput = { kind: 'acknowledge' };
  const { state } = work.alarm(alarm.key).life;
  const acknowledges = state === 'unacknowledged' || state === 'returned-unacknowledged';
  const patch = { acknowledgedBy: acknowledges ? by : before };
  changeAlarm(work, alarm, [input], { reason: reasonAfter(work, alarm, by) }, { patch });
}

/** The reason that it stands for stays readable behind who acknowledged it. */
function reasonAfter(work: StepWork, alarm: AlarmDefinition, by: string): string {
  const reason = work.alarm(alarm.key).facts?.reason ?? '';
  return `${reason}; ${operatorReason.acknowledge(by)}`;
}

function reset(work: StepWork, alarm: AlarmDefinition, by: string): string | null {
  const { life } = work.alarm(alarm.key);
  const kept = 'withheld' in life ? life.latched !== null : 'condition' in life;
  if (!alarm.latched || !kept) return refusal.notLatched;
  if ('condition' in life && life.condition !== null) return refusal.stillOn;
  changeAlarm(work, alarm, [{ kind: 'reset' }], { reason: operatorReason.reset(by) });
  return null;
}

function unshelve(work: StepWork, alarm: AlarmDefinition, why: string): void {
  const row = work.alarm(alarm.key);
  const reason = conditionStands(row) ? `${why}; its condition holds` : why;
  changeAlarm(work, alarm, [{ kind: 'restore', why: 'shelved' }], { reason }, { patch: { shelf: null } });
}

function conditionStands({ life }: AlarmRow): boolean {
  return 'condition' in life && life.condition !== null;
}

function serviceAsk(work: StepWork, { kind, target, by, why }: ServiceAsk): string | null {
  if (by.trim() === '') return refusal.by;
  if (kind === 'out-of-service' && why.trim() === '') return refusal.why;
  const alarms = targetsOf(work, target);
  if (alarms === null) return refusal.unknownTarget(target);
  const out = kind === 'out-of-service';
  const service = out ? { by, why } : null;
  const input: LifeInput = { kind: out ? 'withhold' : 'restore', why: 'out-of-service' };
  for (const alarm of alarms) {
    changeAlarm(work, alarm, [input], { reason: operatorReason[kind](by, why) }, { patch: { service } });
  }
  regroup(work, alarms);
  for (const key of pointsOf(work, target)) work.setPoint(key, { ...work.point(key), service }, true);
  if (work.plan.machines.has(target)) work.setMachine(target, { ...work.machine(target), service }, true);
  const [machine] = target.split('/');
  if (machine !== undefined && work.plan.machines.has(machine)) work.touched.add(machine);
  return null;
}

function targetsOf(work: StepWork, target: string): readonly AlarmDefinition[] | null {
  const one = work.plan.alarms.get(target);
  if (one !== undefined) return [one];
  const point = work.plan.points.get(target);
  if (point !== undefined) return [...point.rules, ...(point.sensor === null ? [] : [point.sensor])];
  return work.plan.machines.get(target)?.alarms ?? null;
}

function pointsOf(work: StepWork, target: string): readonly string[] {
  if (work.plan.points.has(target)) return [target];
  return work.plan.machines.get(target)?.machine.points.map((point) => point.key) ?? [];
}

function startTest(
  work: StepWork,
  alarm: AlarmDefinition,
  { level }: Extract<AskInput, { kind: 'test' }>,
): null {
  const id = work.allocateId();
  const row = { ...work.alarm(alarm.key), test: { level, id, t: work.t, leftS: TEST_S } };
  work.setAlarm(alarm.key, row, true);
  recordChange(work, alarm, row, id, null);
  return null;
}

function endTest(work: StepWork, alarm: AlarmDefinition): void {
  const row = work.alarm(alarm.key);
  const patch = { test: null };
  const words = row.life.state === 'normal' ? { reason: testOverReason } : {};
  changeAlarm(work, alarm, [], words, { patch, retell: true });
}

/** Shelves and tests run by the station's clock. */
export function tickAsks(work: StepWork, elapsedS: number): void {
  const unshelved: AlarmDefinition[] = [];
  for (const [key, { shelf, test }] of Object.entries(work.before.alarms)) {
    const alarm = work.plan.alarms.get(key);
    if (alarm === undefined) continue;
    if (shelf !== null) {
      const leftS = shelf.leftS - elapsedS;
      if (leftS <= 0) {
        unshelve(work, alarm, operatorReason.expired);
        unshelved.push(alarm);
      } else work.setAlarm(key, { ...work.alarm(key), shelf: { ...shelf, leftS } }, false);
    }
    // Coming off the shelf may have ended it.
    if (test !== null && work.alarm(key).test === test) {
      const leftS = test.leftS - elapsedS;
      if (leftS <= 0) endTest(work, alarm);
      else work.setAlarm(key, { ...work.alarm(key), test: { ...test, leftS } }, false);
    }
  }
  // Points that come off the shelf together are one cause.
  regroup(work, unshelved);
}
