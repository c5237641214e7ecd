/** Links, nodes and the gateway itself: one lost node is one alarm, not one for each of its channels. */

import { changeAlarm } from './change.ts';
import { conditionLevel, stepCondition } from './condition.ts';
import type { AlarmInput } from './effects.ts';
import type { AgentAlarm } from './plan.ts';
import { GATEWAY_CONDITIONS, LINK_CONDITIONS, type LinkCondition } from './sensor.ts';
import { agentClearedReason, agentWords } from './texts.ts';
import { sinceOf, UNKNOWN_AFTER } from './tracking.ts';
import type { StepWork } from './work.ts';

export function onLink(work: StepWork, input: Extract<AlarmInput, { kind: 'link' }>): void {
  if (!work.plan.alarms.has(`agent/${input.link}.silent`))
    throw new RangeError(`no link ${input.link} in this station`);
  for (const condition of LINK_CONDITIONS) {
    apply(work, agentAlarm(work, input.link, condition), holds(work, input, condition), 0, input.detail);
  }
  if (input.conditions.length > 0) distrustPoints(work, input.link);
}

export function onGateway(work: StepWork, input: Extract<AlarmInput, { kind: 'gateway' }>): void {
  apply(work, agentAlarm(work, 'gateway', input.condition), input.holds, 0, input.detail);
}

/** Off-delays of links and gateway run by the station's clock: nothing else arrives that could carry time. */
export function tickAgents(work: StepWork, elapsedS: number): void {
  const sources = work.plan.station.links.flatMap((link) =>
    LINK_CONDITIONS.map((c) => [link.id, c] as const),
  );
  for (const [source, condition] of [...sources, ...GATEWAY_CONDITIONS.map((c) => ['gateway', c] as const)]) {
    const alarm = agentAlarm(work, source, condition);
    const { alert } = work.alarm(alarm.key).condition;
    if (alert.contraryS !== null) apply(work, alarm, !alert.on, elapsedS, null);
  }
}

/** A node that is gone may show both ways; the alarm that stands already speaks for both. */
function holds(
  work: StepWork,
  { link, conditions }: Extract<AlarmInput, { kind: 'link' }>,
  condition: LinkCondition,
) {
  const lost = conditions.includes('silent') || conditions.includes('refused');
  if (condition === 'foreign-node' || !lost) return conditions.includes(condition);
  const stands = (c: LinkCondition) => work.alarm(`agent/${link}.${c}`).condition.alert.on;
  if (stands('silent')) return condition === 'silent';
  if (stands('refused')) return condition === 'refused';
  return condition === 'refused' ? conditions.includes('refused') : !conditions.includes('refused');
}

function apply(
  work: StepWork,
  alarm: AgentAlarm,
  says: boolean,
  elapsedS: number,
  detail: string | null,
): void {
  const row = work.alarm(alarm.key);
  const shown = { alert: says, danger: false };
  const condition = stepCondition(
    row.condition,
    alarm.timing,
    { over: shown, near: shown },
    elapsedS,
    work.t,
  );
  if (condition === row.condition) return;
  const level = conditionLevel(condition);
  const words =
    level === null
      ? { reason: agentClearedReason }
      : { ...agentWords(alarm.condition, detail), since: condition.alert.since };
  const input =
    level === null ? { kind: 'condition-off' as const } : { kind: 'condition-on' as const, level };
  changeAlarm(work, alarm, [input], words, { patch: { condition } });
}

/** Nothing is known of these points until their next valid reading. */
function distrustPoints(work: StepWork, link: string): void {
  for (const { point, machine } of work.plan.points.values()) {
    if (point.link !== link) continue;
    work.setPoint(
      point.key,
      { ...work.point(point.key), running: null, zone: null, invalid: UNKNOWN_AFTER },
      false,
    );
    const row = work.machine(machine.id);
    const votes = machine.points.map(({ key }) => work.point(key).running);
    const running = votes.includes(true) ? true : votes.includes(false) ? false : null;
    if (running !== row.running)
      work.setMachine(machine.id, { ...row, running, since: sinceOf(row, running, work.t) }, false);
    work.touched.add(machine.id);
  }
}

function agentAlarm(work: StepWork, source: string, condition: string): AgentAlarm {
  const alarm = work.plan.alarms.get(`agent/${source}.${condition}`);
  if (alarm?.kind !== 'agent') throw new RangeError(`no condition ${condition} of ${source}`);
  return alarm;
}
