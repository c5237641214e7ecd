/**
 * The quiet that keeps alarms believed. Of a machine at most 6 messages are sent in any minute, its state topic among
 * them, and of a station at most 10 newly unacknowledged alarms in any 10 minutes. What does not fit waits, the worst
 * first, and is told as it then stands; what a person asked for does not wait; nothing waits twice, so what waits is bounded by the number of topics. The
 * journal has every change all the same.
 *
 * Ages advance with ticks. What was sent since the last tick is taken to be as young as that tick can make it.
 */

import { type MachineFacts, machineFacts, machinePayload } from './machine-state.ts';
import { alarmPayload } from './payload.ts';
import type { AlarmDefinition } from './plan.ts';
import { type AlarmRow, type QuietRow, signature } from './state.ts';
import type { StepWork } from './work.ts';

const MACHINE_WINDOW_S = 60;
const MACHINE_MESSAGES = 6;
/** One of them is kept for the state topic, so that the lamp follows in a flood, and two more from mere detail. */
const MACHINE_ALARMS = MACHINE_MESSAGES - 1;
const MACHINE_DETAILS = MACHINE_MESSAGES - 3;
/** Of the state topic: at most this many, so that two alarms always find room, */
const MACHINE_STATES = MACHINE_MESSAGES - 2;
/** and fewer where only zone, finding or the like changed, so that whether it runs and how it is are told at once. */
const STATE_DETAILS = 2;
/** More than 10 in 10 minutes is a flood to one operator (ISA-18.2 and IEC 62682, as reproduced). */
const STATION_WINDOW_S = 600;
const STATION_ANNOUNCED = 10;
const STATE_AT_LEAST_S = 3600;
const FRESH = -1;

export function tickQuiet(work: StepWork, elapsedS: number): void {
  const older = (ageS: number) => (ageS === FRESH ? 0 : ageS + elapsedS);
  const sent = Object.entries(work.quiet.sent)
    .map(([machine, messages]) => {
      const aged = messages.map(({ ageS, alarm }) => ({ ageS: older(ageS), alarm }));
      return [machine, aged.filter(({ ageS }) => ageS <= MACHINE_WINDOW_S)] as const;
    })
    .filter(([, messages]) => messages.length > 0);
  const announced = work.quiet.announced.map(older).filter((ageS) => ageS <= STATION_WINDOW_S);
  const idle = sent.length === 0 && announced.length === 0;
  if (idle && Object.keys(work.quiet.sent).length === 0 && work.quiet.announced.length === 0) return;
  work.quiet = { sent: Object.fromEntries(sent), announced };
}

/** Publishes what waits, as far as the quiet allows. */
export function tell(work: StepWork): void {
  const kept: string[] = [];
  const waiting = work.waiting
    .map((key) => ({ key, alarm: work.plan.alarms.get(key)!, row: work.alarm(key) }))
    .sort(
      (a, b) => rank(a.row) - rank(b.row) || compare(sinceOf(a.row), sinceOf(b.row)) || compare(a.key, b.key),
    );
  for (const { key, alarm, row } of waiting) {
    if (signature(row) === row.told) continue;
    if (!publishAlarm(work, alarm, row)) kept.push(key);
  }
  const same = kept.length === work.waiting.length && kept.every((key, i) => key === work.waiting[i]);
  if (!same) work.waiting = work.waiting.filter((key) => kept.includes(key));
  for (const id of work.touched) publishState(work, id);
}

/** The label orders what waits, no more: after a restart as before it. */
function sinceOf({ test, facts }: AlarmRow): string {
  return test?.t ?? facts?.t ?? '';
}

function compare(a: string, b: string): number {
  return a < b ? -1 : Number(a > b);
}

const DETAIL = 4;

/** Dangers before alerts, what asks for acknowledgement before what only tells, details of a group last. */
function rank(row: AlarmRow): number {
  const { life, test } = row;
  if (test !== null) return 0;
  if (life.state === 'suppressed-by-design') return DETAIL;
  if (life.state !== 'unacknowledged') return 3;
  if (!announces(row)) return row.told.startsWith(`${life.state} ${life.level} `) ? DETAIL : 3;
  return life.level === 'danger' ? 1 : 2;
}

/** Whether telling it asks for an acknowledgement that was not asked for before. */
function announces(row: AlarmRow): boolean {
  if (row.test === null && row.life.state !== 'unacknowledged') return false;
  return !row.told.split(' ').includes(row.test?.id ?? row.raised ?? '');
}

function publishAlarm(work: StepWork, alarm: AlarmDefinition, row: AlarmRow): boolean {
  const where = alarm.kind === 'agent' ? 'agent' : alarm.machine.id;
  const sent = work.quiet.sent[where] ?? [];
  const asks = announces(row);
  const alarms = sent.filter((message) => message.alarm).length;
  const full =
    sent.length >= MACHINE_MESSAGES || alarms >= (rank(row) === DETAIL ? MACHINE_DETAILS : MACHINE_ALARMS);
  const flooded = asks && work.quiet.announced.length >= STATION_ANNOUNCED;
  // Whoever asked for it sees what came of it at once: an answer to a person is no flood.
  if ((full || flooded) && !work.asked.has(alarm.key)) return false;
  const id = work.changeIds.get(alarm.key) ?? work.allocateId();
  work.effects.push({
    kind: 'publish',
    class: 'alarm',
    topic: alarm.topic,
    payload: alarmPayload(row, id, work.t),
  });
  work.setAlarm(alarm.key, { ...row, told: signature(row) }, true);
  work.quiet = {
    sent: { ...work.quiet.sent, [where]: [...sent, { ageS: FRESH, alarm: true }] },
    announced: asks ? [...work.quiet.announced, FRESH] : work.quiet.announced,
  };
  return true;
}

function publishState(work: StepWork, machineId: string): void {
  const { machine } = work.plan.machines.get(machineId)!;
  const row = work.machine(machineId);
  const facts = machineFacts(work, machine);
  const told = JSON.stringify(facts);
  // Before the first reading there is nothing to say, least of all that it is well.
  if (row.told === '' && facts.running === null && facts.severity === 0) return;
  if (told === row.told && row.sinceToldS < STATE_AT_LEAST_S) return;
  const sent = work.quiet.sent[machineId] ?? [];
  const states = sent.filter((message) => !message.alarm).length;
  const detail = isDetail(row.told, facts);
  // One point's zone goes when it stops, and the machine stops with the next: a moment later both are one message.
  if (detail && !work.ticked) return;
  const most = detail ? STATE_DETAILS : MACHINE_STATES;
  if (sent.length >= MACHINE_MESSAGES || states >= most) return;
  const payload = machinePayload(facts, row, work.allocateId(), work.t);
  work.effects.push({ kind: 'publish', class: 'state', topic: `${machineId}/state`, payload });
  work.setMachine(machineId, { ...row, told, sinceToldS: 0 }, true);
  const quiet: QuietRow = work.quiet;
  work.quiet = { ...quiet, sent: { ...quiet.sent, [machineId]: [...sent, { ageS: FRESH, alarm: false }] } };
}

/** What the operator acts on is never mere detail. */
function isDetail(told: string, facts: MachineFacts): boolean {
  if (told === '') return false;
  const before = JSON.parse(told) as MachineFacts;
  return (['running', 'severity', 'unacknowledged'] as const).every((key) => before[key] === facts[key]);
}

/** Every machine's state is looked at again, since one may have waited and the hour may be over. */
export function tickStates(work: StepWork, elapsedS: number): void {
  work.ticked = true;
  for (const id of work.plan.machines.keys()) {
    const row = work.machine(id);
    work.setMachine(id, { ...row, sinceToldS: row.sinceToldS + elapsedS }, false);
    work.touched.add(id);
  }
}
