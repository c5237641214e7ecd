/** A reading of one point: sensor, machine, and each rule of that point, and nothing else. */

import type { Level } from '../config/station.ts';
import type { Reading } from '../measure/reading.ts';
import type { Baseline } from './baseline.ts';
import { changeAlarm, type Words } from './change.ts';
import { type ConditionState, conditionLevel, stepCondition } from './condition.ts';
import type { AlarmInput } from './effects.ts';
import { asPublished } from './figure.ts';
import { regroup, underGroup } from './group.ts';
import { type LifeInput, type LifeState, stepLife } from './life-cycle.ts';
import { judge, type Verdict } from './limits.ts';
import type { PointAlarm, PointPlan } from './plan.ts';
import { riseOver } from './rise.ts';
import { GAPS, hasGap, LINK_CONDITIONS, sensorFault } from './sensor.ts';
import type { AlarmRow } from './state.ts';
import {
  agentClearedReason,
  agentWords,
  chatterReason,
  clearedReason,
  conditionCheck,
  conditionReason,
  fallenReason,
  resumedReason,
  riseReason,
  sensorClearedReason,
  sensorWords,
  stoppedReason,
} from './texts.ts';
import { SUPPRESS_AFTER_S, trackMachine, trackPoint } from './tracking.ts';
import type { StepWork } from './work.ts';

type ReadingInput = Extract<AlarmInput, { kind: 'reading' }>;

/** So many announcements within a minute are chattering (ISA-18.2 and IEC 62682, as reproduced). */
const CHATTER_COUNT = 3;
const CHATTER_WINDOW_S = 60;

export function onReading(work: StepWork, input: ReadingInput): void {
  const plan = work.plan.points.get(input.pointKey);
  if (plan === undefined) throw new RangeError(`no point ${input.pointKey} in this station`);
  const { reading, elapsedS, t } = input;
  const { machine, point } = plan;
  const before = work.point(point.key);
  const { row, counts } = trackPoint(before, machine, point, reading, elapsedS);
  work.setPoint(point.key, row, false);
  const votes = machine.points.map(({ key }) => work.point(key).running);
  const followed = trackMachine(work.machine(machine.id), votes, point.key, reading.running, elapsedS, t);
  work.setMachine(machine.id, followed, false);
  work.touched.add(machine.id);
  judgeSensor(work, plan, reading, elapsedS);
  if (plan.speaksForLink) judgeGaps(work, plan, reading, elapsedS);
  if (!counts && row.uncountedS >= SUPPRESS_AFTER_S && before.uncountedS < SUPPRESS_AFTER_S)
    suppressStopped(work, plan);
  for (const alarm of plan.rules) {
    // The quality of readings is no matter of the machine's running.
    if (!counts && alarm.rule.watch !== 'quality') continue;
    resume(work, alarm);
    judgeRule(work, alarm, reading, elapsedS, input.baseline ?? null);
  }
}

function judgeRule(
  work: StepWork,
  alarm: PointAlarm,
  reading: Reading,
  elapsedS: number | null,
  baseline: Baseline | null,
): void {
  const verdict = judge(alarm.rule, alarm.point, reading, baseline);
  if (verdict === null) return;
  const was = work.alarm(alarm.key).condition;
  const next = stepCondition(was, alarm.timing, verdict, elapsedS, work.t);
  applyCondition(work, alarm, next, elapsedS, conditionWords(alarm, verdict, was, next), reading);
}

function conditionWords(
  alarm: PointAlarm,
  verdict: Verdict,
  was: ConditionState,
  next: ConditionState,
): Words {
  const { value, unit, limit } = verdict;
  const level = conditionLevel(next);
  if (level === null) {
    const reason = clearedReason(alarm.rule, alarm.timing);
    return { value, unit, limit: limit.alert ?? limit.danger, reason };
  }
  return {
    value,
    unit,
    limit: limit[level],
    since: next[level].since,
    reason:
      level === 'alert' && was.danger.on
        ? fallenReason(alarm.rule, verdict)
        : conditionReason(alarm.rule, verdict, level),
    check: conditionCheck(alarm.rule.watch, level),
  };
}

/** The trend of a figure, judged by a `rise` rule; it stands or falls by each judgement, without further delay. */
export function onTrend(work: StepWork, input: Extract<AlarmInput, { kind: 'trend' }>): void {
  const alarm = work.plan.alarms.get(input.alarm);
  if (alarm?.kind !== 'point' || alarm.rule.test.kind !== 'rise') {
    throw new RangeError(`${input.alarm} is not an alarm of a rise rule`);
  }
  const { alertPct, dangerPct, overDays } = alarm.rule.test;
  const rise = riseOver(input.samples, overDays);
  if (rise === null) return;
  // Sure enough: the estimate is over the limit, and even the low end of its interval over half of it.
  const over = (pct: number | null) =>
    pct !== null && asPublished(rise.pct) > pct && rise.atLeastPct > pct / 2;
  const says = { alert: over(alertPct) || over(dangerPct), danger: over(dangerPct) };
  const timing = { onDelayS: 0, offDelayS: 0, readings: null };
  const next = stepCondition(
    work.alarm(alarm.key).condition,
    timing,
    { over: says, near: says },
    null,
    work.t,
  );
  const level = conditionLevel(next);
  const limit = level === 'danger' ? dangerPct : (alertPct ?? dangerPct);
  const words: Words = { value: rise.pct, unit: '%', limit, reason: riseReason(alarm.rule, rise, overDays) };
  const check = conditionCheck(alarm.rule.watch, level ?? 'alert');
  applyCondition(
    work,
    alarm,
    next,
    null,
    level === null ? words : { ...words, since: next[level].since, check },
    null,
  );
}

function applyCondition(
  work: StepWork,
  alarm: PointAlarm,
  next: ConditionState,
  elapsedS: number | null,
  words: Words,
  reading: Reading | null,
): void {
  const row = work.alarm(alarm.key);
  const was = row.condition;
  const found = conditionLevel(next);
  const chatter = ageChatter(row.chatter, elapsedS, found !== null);
  // While it chatters, its condition is held on until it has been off for a while.
  const level = found ?? (chatter.quietS === null ? null : (conditionLevel(was) ?? heldLevel(row.life)));
  const guided = underGroup(work, alarm, level);
  const options = {
    patch: { condition: next, chatter, ...guided.patch },
    ...(reading === null ? {} : { reading }),
  };
  const third = chatter.agesS.length + 1 >= CHATTER_COUNT && chatter.quietS === null;
  const chattering = third && announces(row.life, guided.inputs, alarm.latched);
  const reason =
    chattering && words.reason !== undefined ? chatterReason(words.reason, CHATTER_WINDOW_S) : words.reason;
  const said = { ...words, ...(reason === undefined ? {} : { reason }), ...guided.words };
  const announced = changeAlarm(work, alarm, guided.inputs, said, options);
  if (announced) {
    const now = work.alarm(alarm.key);
    const agesS = [...now.chatter.agesS, 0].slice(-CHATTER_COUNT);
    work.setAlarm(
      alarm.key,
      { ...now, chatter: { agesS, quietS: agesS.length >= CHATTER_COUNT ? 0 : null } },
      true,
    );
  }
  tellEvidence(work, alarm, row, next, announced);
  regroup(work, [alarm]);
}

function announces(from: LifeState, inputs: readonly LifeInput[], latched: boolean): boolean {
  let life = from;
  return inputs.some((input) => {
    const step = stepLife(life, input, latched);
    life = step.state;
    return step.announced;
  });
}

function heldLevel(life: LifeState): Level | null {
  return 'level' in life ? life.level : null;
}

type Chatter = { readonly agesS: readonly number[]; readonly quietS: number | null };

function ageChatter(from: Chatter, elapsedS: number | null, on: boolean): Chatter {
  if (from.agesS.length === 0 && from.quietS === null) return from;
  const add = elapsedS ?? 0;
  const agesS = from.agesS.map((age) => age + add).filter((age) => age <= CHATTER_WINDOW_S);
  if (from.quietS === null) return { agesS, quietS: null };
  const quietS = on ? 0 : from.quietS + add;
  return quietS >= CHATTER_WINDOW_S ? { agesS: [], quietS: null } : { agesS, quietS };
}

function tellEvidence(
  work: StepWork,
  alarm: PointAlarm,
  { condition: was, life }: AlarmRow,
  now: ConditionState,
  announced: boolean,
) {
  const idle = (state: ConditionState) => state.alert.since === null && state.danger.since === null;
  // On a shelf, suppressed or out of service it may come and go without a word.
  const stood = conditionLevel(was) !== null && !('withheld' in life);
  const tell = (what: 'begin' | 'keep' | 'drop') =>
    work.effects.push({ kind: 'evidence', alarm: alarm.key, pointKey: alarm.point.key, what });
  if (idle(was) && !idle(now)) tell('begin');
  if (announced) tell('keep');
  if (!stood && !idle(was) && idle(now)) tell('drop');
}

function judgeSensor(work: StepWork, { sensor }: PointPlan, reading: Reading, elapsedS: number | null): void {
  // Where samples are missing the counts stand still, and that is not the sensor.
  if (sensor === null || hasGap(reading)) return;
  const fault = sensorFault(reading);
  const says = { alert: fault !== null, danger: false };
  const row = work.alarm(sensor.key);
  const condition = stepCondition(row.condition, sensor.timing, { over: says, near: says }, elapsedS, work.t);
  const level = conditionLevel(condition);
  const words =
    level === null || fault === null
      ? { reason: sensorClearedReason }
      : { ...sensorWords(fault, sensor.timing), since: condition.alert.since };
  const input =
    level === null ? { kind: 'condition-off' as const } : { kind: 'condition-on' as const, level };
  changeAlarm(work, sensor, [input], words, { patch: { condition }, reading });
}

function judgeGaps(work: StepWork, { point }: PointPlan, reading: Reading, elapsedS: number | null): void {
  const alarm = work.plan.alarms.get(`agent/${point.link}.${GAPS}`);
  if (alarm === undefined) return;
  // The hole that a lost node leaves is told already.
  const lost = LINK_CONDITIONS.some(
    (c) => work.alarm(`agent/${point.link}.${c}`).condition.alert.since !== null,
  );
  if (lost) return;
  const says = { alert: hasGap(reading), danger: false };
  const row = work.alarm(alarm.key);
  const condition = stepCondition(row.condition, alarm.timing, { over: says, near: says }, elapsedS, work.t);
  const level = conditionLevel(condition);
  const words =
    level === null
      ? { reason: agentClearedReason }
      : { ...agentWords(GAPS, null), since: condition.alert.since };
  const input =
    level === null ? { kind: 'condition-off' as const } : { kind: 'condition-on' as const, level };
  changeAlarm(work, alarm, [input], words, { patch: { condition } });
}

/** An alarm that stands is left alone: a stop must neither clear nor raise it. */
function suppressStopped(work: StepWork, plan: PointPlan): void {
  for (const alarm of plan.rules) {
    if (alarm.rule.watch === 'quality' || work.alarm(alarm.key).life.state !== 'normal') continue;
    const options = { patch: { suppressedBy: 'stop' as const } };
    changeAlarm(
      work,
      alarm,
      [{ kind: 'withhold', why: 'suppressed-by-design' }],
      { reason: stoppedReason },
      options,
    );
  }
}

function resume(work: StepWork, alarm: PointAlarm): void {
  if (work.alarm(alarm.key).suppressedBy !== 'stop') return;
  const options = { patch: { suppressedBy: null } };
  changeAlarm(
    work,
    alarm,
    [{ kind: 'restore', why: 'suppressed-by-design' }],
    { reason: resumedReason },
    options,
  );
}
