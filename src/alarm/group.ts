/**
 * One cause, one alarm. While up to two points of a machine stand in the same rule, each speaks for itself; from the
 * third on the machine's own alarm speaks for them, and the points that join are suppressed by design, with their
 * condition still told in that state. The first two keep their announcements: whoever saw them can acknowledge them.
 *
 * No point stays suppressed under an alarm that does not speak for it: one that is over, out of service, or has left the
 * configuration. On the shelf it still keeps quiet what it stood for, as whoever shelved it asked; what comes new
 * meanwhile speaks for itself.
 */

import type { Level } from '../config/station.ts';
import { changeAlarm, type Words } from './change.ts';
import { conditionLevel } from './condition.ts';
import { type LifeInput, type LifeState, stepLife, worse } from './life-cycle.ts';
import type { AlarmDefinition, GroupAlarm, PointAlarm } from './plan.ts';
import type { AlarmRow } from './state.ts';
import { conditionCheck, groupedReason, groupReason, releasedReason } from './texts.ts';
import type { StepWork } from './work.ts';

/** Points that must stand together for the machine's alarm. Common practice, no source. */
const GROUP_FROM = 3;

function groupOf(work: StepWork, { machine, rule }: PointAlarm): GroupAlarm | null {
  const group = work.plan.alarms.get(`${machine.id}/machine.${rule.id}`);
  return group?.kind === 'group' ? group : null;
}

/** The alarms that a group stands for. */
export function membersOf(work: StepWork, { machine, rule }: GroupAlarm): PointAlarm[] {
  return machine.points
    .map((point) => work.plan.alarms.get(`${point.key}.${rule.id}`))
    .filter((alarm) => alarm?.kind === 'point');
}

interface Guided {
  readonly inputs: readonly LifeInput[];
  readonly words: Words;
  readonly patch: Pick<AlarmRow, 'suppressedBy'>;
}

/** How the group changes what a point's condition does to the point's alarm. */
export function underGroup(work: StepWork, alarm: PointAlarm, level: Level | null): Guided {
  const row = work.alarm(alarm.key);
  const input: LifeInput = level === null ? { kind: 'condition-off' } : { kind: 'condition-on', level };
  if (row.suppressedBy === 'group' && level === null) {
    const inputs: LifeInput[] = [input, { kind: 'restore', why: 'suppressed-by-design' }];
    return { inputs, words: {}, patch: { suppressedBy: null } };
  }
  const alone: Guided = { inputs: [input], words: {}, patch: { suppressedBy: row.suppressedBy } };
  const group = groupOf(work, alarm);
  if (group === null || level === null || !stepLife(row.life, input, alarm.latched).announced) {
    return alone;
  }
  const { life } = work.alarm(group.key);
  const others = standing(work, group).filter((member) => member.key !== alarm.key);
  if ('withheld' in life || (others.length + 1 < GROUP_FROM && !hasCondition(life))) return alone;
  const suppress: LifeInput = { kind: 'withhold', why: 'suppressed-by-design' };
  const words = { reason: groupedReason(group.key) };
  return { inputs: [suppress, input], words, patch: { suppressedBy: 'group' } };
}

/** After something changed of these alarms: brings machines' alarms and their points in line with each other. */
export function regroup(work: StepWork, alarms: Iterable<AlarmDefinition>): void {
  const groups = new Set<GroupAlarm>();
  for (const alarm of alarms) {
    if (alarm.kind === 'group') groups.add(alarm);
    if (alarm.kind !== 'point') continue;
    const group = groupOf(work, alarm);
    if (group === null) release(work, alarm);
    else groups.add(group);
  }
  for (const group of groups) {
    updateGroup(work, group);
    if (speaks(work.alarm(group.key).life)) continue;
    for (const member of membersOf(work, group)) release(work, member);
  }
}

function speaks(life: LifeState): boolean {
  return hasCondition(life) && life.state !== 'out-of-service';
}

/** A point that nothing speaks for any more does so itself; under a shelf or out of service, once that is over. */
function release(work: StepWork, member: PointAlarm): void {
  const { suppressedBy, shelf, service, life } = work.alarm(member.key);
  if (suppressedBy !== 'group' || shelf !== null || service !== null) return;
  const level = 'condition' in life ? life.condition : null;
  if (level === null) return;
  changeAlarm(
    work,
    member,
    [{ kind: 'restore', why: 'suppressed-by-design' }],
    { reason: releasedReason(member.rule, level) },
    { patch: { suppressedBy: null } },
  );
}

function updateGroup(work: StepWork, group: GroupAlarm): void {
  const row = work.alarm(group.key);
  const members = standing(work, group);
  if (members.length < GROUP_FROM && !hasCondition(row.life)) return;
  const told = row.facts?.members ?? 0;
  if (members.length === 0) {
    changeAlarm(work, group, [{ kind: 'condition-off' }], {
      members: 0,
      reason: 'no point of the group stands any more',
    });
    return;
  }
  const level = members.reduce<Level | null>((worst, member) => worse(worst, levelOf(work, member)), null)!;
  const worst = members.find((member) => levelOf(work, member) === level)!;
  const facts = work.alarm(worst.key).facts;
  const words: Words = {
    value: facts?.value ?? null,
    limit: facts?.limit ?? null,
    unit: facts?.unit ?? null,
    since: row.facts?.since != null && hasCondition(row.life) ? row.facts.since : (facts?.since ?? work.t),
    reason: groupReason(
      group.rule,
      group.machine.name,
      members.map((member) => member.point.id),
      level,
    ),
    check: conditionCheck(group.rule.watch, level),
    // The largest number that stood together: a point that goes is no news.
    members: hasCondition(row.life) ? Math.max(told, members.length) : members.length,
  };
  const grown = hasCondition(row.life) && members.length > told;
  changeAlarm(work, group, [{ kind: 'condition-on', level }], words, { retell: grown });
}

function standing(work: StepWork, group: GroupAlarm): PointAlarm[] {
  return membersOf(work, group).filter((member) => {
    const { life, service, shelf } = work.alarm(member.key);
    return service === null && shelf === null && levelOf(work, member) !== null && hasCondition(life);
  });
}

function levelOf(work: StepWork, member: PointAlarm): Level | null {
  return conditionLevel(work.alarm(member.key).condition);
}

function hasCondition(life: LifeState): boolean {
  return 'condition' in life && life.condition !== null;
}
