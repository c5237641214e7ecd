/**
 * The words of alarms, in one place: what was measured, against which limit and whose, for how long; what to look at
 * next; and the caution where a person would go near the machine. They advise: nothing here asks for a trip.
 */

import type { Level, Rule } from '../config/station.ts';
import type { Timing } from './condition.ts';
import { figure4, type Verdict, watchesFall } from './limits.ts';
import type { Rise } from './rise.ts';
import type { GAPS, GatewayCondition, LinkCondition, SensorFault } from './sensor.ts';

/** Ends every advice that leads a person to the machine. */
const NEAR_THE_MACHINE =
  'Advice only: no trip may depend on it. The machine may start by itself: isolate and lock it by local codes and procedure before reaching in; opening it is for qualified people.';

const FIGURE_WORDS: Readonly<Record<string, string>> = {
  'envelope.defect': 'bearing lines of the envelope',
  'envelope.mean': 'envelope mean',
  'acceleration.mean_hz': 'mean frequency of the acceleration',
  'envelope.bpfo.over_floor_db': 'outer race line over the floor',
  'envelope.bpfi.over_floor_db': 'inner race line over the floor',
  'envelope.bsf.over_floor_db': 'rolling element line over the floor',
  'envelope.ftf.over_floor_db': 'cage line over the floor',
  'orders.1.mm_s': 'velocity at 1× shaft speed',
  'orders.2.mm_s': 'velocity at 2× shaft speed',
  'orders.3.mm_s': 'velocity at 3× shaft speed',
};

function figureWords(watch: string): string {
  return FIGURE_WORDS[watch] ?? watch.replaceAll('.', ' ');
}

function forHowLong(timing: Timing): string {
  const parts: string[] = [];
  if (timing.readings !== null)
    parts.push(`in ${timing.readings[0]} of the last ${timing.readings[1]} readings`);
  if (timing.onDelayS > 0) parts.push(`for ${figure4(timing.onDelayS)} s`);
  return parts.length === 0 ? '' : ` ${parts.join(', ')}`;
}

/** What was measured, against which limit and whose, for how long. */
export function conditionReason(rule: Rule, verdict: Verdict, level: Level): string {
  const long = forHowLong(rule);
  if (rule.test.kind === 'is') return `${wordReason(rule.watch, rule.test.values, verdict.value)}${long}`;
  return `${shownFigure(rule, verdict)} ${beyond(rule, verdict, level)}${long}: ${whoseLimit(rule, verdict, level)}`;
}

/** Danger is over while the alert still stands: by a figure over its limit, its deadband or its off-delay. */
export function fallenReason(rule: Rule, verdict: Verdict): string {
  const what = shownFigure(rule, verdict);
  const clear = forHowLong({ ...rule, onDelayS: rule.offDelayS });
  if (rule.readings !== null) {
    const alert = limitWords(verdict, 'alert');
    return `danger is over: ${what} no longer ${beyond(rule, verdict, 'danger')}${clear}; alert is held: not yet so for ${alert}`;
  }
  const over = `danger is over: ${what} back within ${limitWords(verdict, 'danger')} and its deadband${clear}`;
  const side = beyond(rule, verdict, 'alert');
  if (verdict.over.alert) return `${over}; alert stands: ${side}, ${whoseLimit(rule, verdict, 'alert')}`;
  return verdict.near.alert
    ? `${over}; alert is held: not ${side}, but still within the deadband of that limit`
    : `${over}; alert is held: no longer ${side}, but not yet clear of its deadband${clear}`;
}

/** What a rule for words has seen; a bearing is accused, everything else just is. */
function wordReason(watch: string, values: readonly string[], value: Verdict['value']): string {
  const what = figureWords(watch);
  return watch === 'envelope.defect'
    ? `${what} accuse ${value ?? 'nothing now'}`
    : `${what} is ${values.join(' or ')}`;
}

function shownFigure({ watch, test }: Rule, { unit }: Verdict): string {
  return test.kind === 'zones' && unit === 'µm' ? 'displacement rms' : figureWords(watch);
}

function limitWords({ limit, unit }: Verdict, level: Level): string {
  const at = limit[level];
  return at === null ? 'its limit' : `${figure4(at)}${unit ? ` ${unit}` : ''}`;
}

function beyond({ test }: Rule, verdict: Verdict, level: Level): string {
  return `${watchesFall(test) ? 'below' : 'above'} ${limitWords(verdict, level)}`;
}

function whoseLimit({ test }: Rule, { whose }: Verdict, level: Level): string {
  if (test.kind === 'zones') return `zone ${level === 'danger' ? 'D' : 'C'}, ${whose}`;
  const times = test.kind === 'baseline' ? test[level] : null;
  return `${level} limit of ${whose}${times === null ? '' : `, factor ${figure4(times)}`}`;
}

export function riseReason(rule: Rule, rise: Rise, overDays: number): string {
  return (
    `${figureWords(rule.watch)} up ${figure4(rise.pct)} % over ${figure4(overDays)} days, from ` +
    `${figure4(rise.levelBefore)} to ${figure4(rise.levelNow)}, at least ${figure4(rise.atLeastPct)} % with 95 % confidence`
  );
}

export function clearedReason({ watch, test }: Rule, timing: Timing): string {
  if (test.kind === 'is') {
    const clear = forHowLong({ ...timing, onDelayS: timing.offDelayS });
    const what = watch === 'envelope.defect' ? 'accuse it' : test.values.join(' or ');
    return `${figureWords(watch)} no longer ${what}${clear}`;
  }
  const long = timing.offDelayS > 0 ? ` for ${figure4(timing.offDelayS)} s` : '';
  return `${figureWords(watch)} back within its limit and deadband${long}`;
}

/** What to look at next, by what the rule watches. */
export function conditionCheck(watch: string, level: Level): string {
  const first = level === 'danger' ? 'Call whoever decides whether it may go on running. ' : '';
  return `${first}${lookNext(watch)} ${NEAR_THE_MACHINE}`;
}

function lookNext(watch: string): string {
  if (watch.startsWith('envelope.') || watch === 'acceleration.kurtosis' || watch === 'acceleration.crest') {
    return 'Compare the envelope with earlier readings, look at lubrication, and plan the bearing if it persists or grows.';
  }
  if (watch === 'acceleration.mean_hz') {
    return 'See whether the sensor still sits tight and its cable is whole; then compare the other points.';
  }
  if (watch.startsWith('acceleration.')) {
    return 'Compare bearing lines and flow conditions: bearing, lubrication and cavitation raise it first.';
  }
  if (watch.startsWith('displacement.') || watch.startsWith('velocity.') || watch === 'zone') {
    return 'Compare the other points and the finding: unbalance, coupling, feet and pipe strain, blockage, duty point.';
  }
  if (watch.startsWith('orders.')) {
    return 'Compare the orders of the other points: unbalance shows at 1×, misalignment and looseness at 2× and above.';
  }
  if (watch.startsWith('shaft.')) return 'Compare with the drive and the duty of the pump.';
  return 'Compare with the other points of the machine and its trend.';
}

export function groupReason(rule: Rule, name: string, points: readonly string[], level: Level): string {
  const shown = points.slice(0, 8).join(', ') + (points.length > 8 ? ' and more' : '');
  const levels = level === 'danger' ? 'alert or danger' : 'alert';
  return `${points.length} points of ${name} stand in ${levels} by rule ${rule.id} together: ${shown}`;
}

export const releasedReason = ({ watch, id }: Rule, level: Level): string =>
  `${figureWords(watch)} stands in ${level} by rule ${id}: the alarm of its machine no longer speaks for it`;
export const groupedReason = (group: string): string => `one cause, one alarm: announced as ${group}`;
export const stoppedReason =
  'the machine has not been running, or not steadily, for an hour: nothing is judged';
export const leftReason = 'it has left the configuration: nothing is judged by it any more';
export const resumedReason = 'readings of the running machine count again';
export const testOverReason = 'test of the alarm chain ended';

export function chatterReason(reason: string, quietS: number): string {
  return `${reason}; chattering, 3 or more announcements in a minute: held until it has been quiet for ${quietS} s`;
}

const SENSOR_REASON: Readonly<Record<SensorFault, string>> = {
  'flat line': 'the sensor gives a flat line: no figure of this point can be trusted',
  'over-range': 'the signal reaches the limit of the converter: no figure of this point can be trusted',
};

const SENSOR_CHECK: Readonly<Record<SensorFault, string>> = {
  'flat line': 'Check plug, cable and supply of the sensor.',
  'over-range': 'Check mounting and cable of the sensor and whether its range suits the machine.',
};

export function sensorWords(fault: SensorFault, timing: Timing): { reason: string; check: string } {
  return {
    reason: `${SENSOR_REASON[fault]}${forHowLong(timing)}`,
    check: `${SENSOR_CHECK[fault]} ${NEAR_THE_MACHINE}`,
  };
}

export const sensorClearedReason = 'the sensor gives usable readings again';

type AgentCondition = LinkCondition | GatewayCondition | typeof GAPS;

const AGENT_WORDS: Readonly<Record<AgentCondition, { reason: string; check: string }>> = {
  silent: {
    reason: 'no samples arrive from this node: its points are not watched',
    check: 'Check supply and cable of the node, then its plug at the gateway.',
  },
  refused: {
    reason: 'the device or the connection of this link cannot be opened: its points are not watched',
    check: 'Check that the device is plugged in and that nothing else holds the port.',
  },
  'foreign-node': {
    reason: 'another node speaks on this link than the one configured: its figures are withheld',
    check:
      'Compare node number, serial number, rate and channels with the station file: were two cables swapped?',
  },
  gaps: {
    reason: 'samples of this node keep getting lost: its readings have no figures',
    check: 'Check cable, baud rate and the load of the gateway.',
  },
  database: {
    reason: 'the database could not be used and was set aside: acknowledgements and history may be gone',
    check:
      'Look at the acknowledgements again; keep the file that was set aside, and look at the storage card.',
  },
  disk: {
    reason: 'the disk is full or fails: alarms may not survive a restart',
    check: 'Free space or change the card.',
  },
  measuring: {
    reason: 'measuring does not keep up or has failed: readings are missing',
    check: 'Look at the health topic for the load of the gateway; ask for fewer lines or longer intervals.',
  },
  configuration: {
    reason: 'the new configuration is not valid: the one before stays in force',
    check: 'Run the check command on the station file.',
  },
};

export function agentWords(condition: string, detail: string | null): { reason: string; check: string } {
  const words = AGENT_WORDS[condition as AgentCondition];
  return { reason: detail === null ? words.reason : `${words.reason} (${detail})`, check: words.check };
}

export const agentClearedReason = 'the condition is over';

export const operatorReason = {
  acknowledge: (by: string) => `acknowledged by ${by}`,
  shelve: (by: string, minutes: number) => `shelved by ${by} for ${figure4(minutes)} min`,
  unshelve: (by: string) => `taken from the shelf by ${by}`,
  expired: 'its time on the shelf is over',
  'out-of-service': (by: string, why: string) => `out of service by ${by}: ${why}`,
  'in-service': (by: string, why: string) => `back in service by ${by}${why === '' ? '' : `: ${why}`}`,
  reset: (by: string) => `reset by ${by}`,
} as const;

export const refusal = {
  unknownAlarm: (key: string) => `no alarm ${key} in this station`,
  unknownTarget: (key: string) => `no alarm, point or machine ${key} in this station`,
  nothingToAcknowledge: (state: string) => `nothing to acknowledge: the alarm is ${state}`,
  raisedAgain: (raised: string | null) => `it has been raised anew since: raised is ${raised ?? 'null'} now`,
  minutes: 'minutes is a number from 1 to 1440',
  notShelved: 'the alarm is not on the shelf',
  by: 'by is missing: who asks?',
  why: 'why is missing: for what reason?',
  notLatched: 'nothing to reset: the alarm does not stand latched',
  stillOn: 'its condition still holds',
} as const;
