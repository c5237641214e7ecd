/** Which alarms a station has: one a rule and point, one a rule and machine for groups, one a condition of each link. */

import type { Machine, Point, Rule, Station } from '../config/station.ts';
import type { Timing } from './condition.ts';
import { ruleApplies } from './limits.ts';
import { GAPS, GATEWAY_CONDITIONS, LINK_CONDITIONS, LINK_TIMING, LOST_TIMING, PERSISTENT } from './sensor.ts';

interface Common {
  /** `pump-1/motor-de-h.zone`: how asks name it. */
  readonly key: string;
  /** Below `forebay/<site>/`. */
  readonly topic: string;
  readonly timing: Timing;
  readonly latched: boolean;
}

/** A rule at a point. */
export interface PointAlarm extends Common {
  readonly kind: 'point';
  readonly machine: Machine;
  readonly point: Point;
  readonly rule: Rule;
}

/** The sensor of a point. */
interface SensorAlarm extends Common {
  readonly kind: 'sensor';
  readonly machine: Machine;
  readonly point: Point;
}

/** A rule at a machine as a whole: it stands for its points where one cause shows at several. */
export interface GroupAlarm extends Common {
  readonly kind: 'group';
  readonly machine: Machine;
  readonly rule: Rule;
}

/** A link, a node or the gateway. */
export interface AgentAlarm extends Common {
  readonly kind: 'agent';
  readonly source: string;
  readonly condition: string;
}

export type AlarmDefinition = PointAlarm | SensorAlarm | GroupAlarm | AgentAlarm;

export interface PointPlan {
  readonly point: Point;
  readonly machine: Machine;
  readonly rules: readonly PointAlarm[];
  readonly sensor: SensorAlarm | null;
  /** The first point of its link, which speaks for the link about gaps. */
  readonly speaksForLink: boolean;
}

export interface AlarmPlan {
  readonly station: Station;
  readonly alarms: ReadonlyMap<string, AlarmDefinition>;
  readonly points: ReadonlyMap<string, PointPlan>;
  readonly machines: ReadonlyMap<
    string,
    { readonly machine: Machine; readonly alarms: readonly AlarmDefinition[] }
  >;
}

/** Lays out the alarms of a station once, so that a step touches only what concerns it. */
export function planAlarms(station: Station): AlarmPlan {
  const alarms = new Map<string, AlarmDefinition>();
  const points = new Map<string, PointPlan>();
  const machines = new Map<string, { machine: Machine; alarms: AlarmDefinition[] }>();
  const spoken = new Set<string>();
  const add = <T extends AlarmDefinition>(alarm: T): T => {
    alarms.set(alarm.key, alarm);
    if (alarm.kind !== 'agent') machines.get(alarm.machine.id)!.alarms.push(alarm);
    return alarm;
  };
  const sensorRule = station.rules.find((rule) => rule.test.kind === 'sensor');
  for (const machine of station.machines) {
    machines.set(machine.id, { machine, alarms: [] });
    for (const point of machine.points) {
      const rules = station.rules
        .filter((rule) => rule.test.kind !== 'sensor' && ruleApplies(rule, point))
        .map((rule) => add(pointAlarm(machine, point, rule)));
      const sensed = sensorRule !== undefined && ruleApplies(sensorRule, point);
      const sensor = sensed ? add(sensorAlarm(machine, point, sensorRule)) : null;
      points.set(point.key, { point, machine, rules, sensor, speaksForLink: !spoken.has(point.link) });
      spoken.add(point.link);
    }
    for (const rule of station.rules) {
      const members = machine.points.filter((point) => alarms.has(`${point.key}.${rule.id}`));
      if (rule.test.kind !== 'sensor' && members.length > 1) add(groupAlarm(machine, rule));
    }
  }
  for (const link of station.links) {
    for (const condition of [...LINK_CONDITIONS, GAPS]) add(agentAlarm(link.id, condition));
  }
  for (const condition of GATEWAY_CONDITIONS) add(agentAlarm('gateway', condition));
  return { station, alarms, points, machines };
}

function pointAlarm(machine: Machine, point: Point, rule: Rule): PointAlarm {
  const names = namesOf(machine.id, `${point.id}.${rule.id}`);
  return { kind: 'point', ...names, machine, point, rule, timing: rule, latched: rule.latched };
}

function sensorAlarm(machine: Machine, point: Point, rule: Rule): SensorAlarm {
  // Most of the last readings is patience enough; a delay on top would only leave the machine unwatched for longer.
  const timing = { onDelayS: 0, offDelayS: rule.offDelayS, readings: PERSISTENT };
  const names = namesOf(machine.id, `${point.id}.${rule.id}`);
  return { kind: 'sensor', ...names, machine, point, timing, latched: rule.latched };
}

function groupAlarm(machine: Machine, rule: Rule): GroupAlarm {
  // Its members have waited already.
  const timing = { onDelayS: 0, offDelayS: 0, readings: null };
  return {
    kind: 'group',
    ...namesOf(machine.id, `machine.${rule.id}`),
    machine,
    rule,
    timing,
    latched: rule.latched,
  };
}

function agentAlarm(source: string, condition: string): AgentAlarm {
  const lost = condition === 'silent' || condition === 'refused';
  const timing =
    condition === GAPS ? { ...LINK_TIMING, readings: PERSISTENT } : lost ? LOST_TIMING : LINK_TIMING;
  return {
    kind: 'agent',
    ...namesOf('agent', `${source}.${condition}`),
    source,
    condition,
    timing,
    latched: false,
  };
}

function namesOf(machine: string, name: string): { key: string; topic: string } {
  return { key: `${machine}/${name}`, topic: `${machine}/alarm/${name}` };
}
