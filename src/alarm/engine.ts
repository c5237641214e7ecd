/**
 * The alarm engine: `(state, input) → (state, effects)`. No clock, no storage, no MQTT; wall time is a label that comes
 * with each input, durations come as elapsed seconds. A step touches the alarms of one point, so its work does not grow
 * with the station. The caller commits the effects of a step in one transaction and only then keeps the new state.
 */

import type { AlarmEffect, AlarmInput, AllocateId, StoredRow } from './effects.ts';
import { onFindings } from './findings-hold.ts';
import { onGateway, onLink, tickAgents } from './on-agent.ts';
import { onAsk, tickAsks } from './on-ask.ts';
import { onReading, onTrend } from './on-reading.ts';
import { journalLeft, settle } from './on-restore.ts';
import type { AlarmPlan } from './plan.ts';
import { tell, tickQuiet, tickStates } from './quiet.ts';
import { type AlarmRow, type EngineState, NEW_MACHINE, NEW_QUIET, ROW_VERSION, signature } from './state.ts';
import { StepWork } from './work.ts';

export interface EngineStep {
  readonly state: EngineState;
  readonly effects: readonly AlarmEffect[];
}

/** One input. Throws RangeError for a point, link or machine that the plan does not have. */
export function stepAlarms(
  plan: AlarmPlan,
  state: EngineState,
  input: AlarmInput,
  allocateId: AllocateId,
): EngineStep {
  const work = new StepWork(plan, state, input.t, allocateId);
  switch (input.kind) {
    case 'reading':
      onReading(work, input);
      break;
    case 'trend':
      onTrend(work, input);
      break;
    case 'link':
      onLink(work, input);
      break;
    case 'gateway':
      onGateway(work, input);
      break;
    case 'findings':
      onFindings(work, input);
      break;
    case 'tick':
      tickQuiet(work, input.elapsedS);
      tickAsks(work, input.elapsedS);
      tickAgents(work, input.elapsedS);
      tickStates(work, input.elapsedS);
      break;
    default:
      onAsk(work, input);
  }
  tell(work);
  return work.finish();
}

export const EMPTY_STATE: EngineState = {
  alarms: {},
  points: {},
  machines: {},
  quiet: NEW_QUIET,
  waiting: [],
};

/**
 * The state from rows that were kept. Rows of what has left the configuration are dropped and their topics emptied; a
 * row of another version is dropped as well, since a guess about an alarm is worse than a fresh start. What changes by
 * it is told with the next step.
 */
export function restoreAlarms(
  plan: AlarmPlan,
  rows: Readonly<Record<string, StoredRow>>,
  t: string,
  allocateId: AllocateId,
): EngineStep {
  const effects: AlarmEffect[] = [];
  const alarms: Record<string, AlarmRow> = {};
  const points: Record<string, EngineState['points'][string]> = {};
  const machines: Record<string, EngineState['machines'][string]> = {};
  let quiet = NEW_QUIET;
  for (const [rowKey, stored] of Object.entries(rows)) {
    const key = rowKey.slice(rowKey.indexOf(':') + 1);
    const { v, of, ...row } = stored;
    const known =
      of === 'quiet' ||
      (of === 'alarm' && plan.alarms.has(key)) ||
      (of === 'point' && plan.points.has(key)) ||
      (of === 'machine' && plan.machines.has(key));
    if (!known || v !== ROW_VERSION) {
      effects.push({ kind: 'row', key: rowKey, row: null, urgent: true });
      if (stored.of === 'alarm' && (stored.facts !== null || stored.test !== null))
        effects.push({ kind: 'withdraw', topic: key.replace('/', '/alarm/') });
      if (stored.of === 'alarm' && v === ROW_VERSION)
        effects.push(...journalLeft(key, stored, t, allocateId));
      if (of === 'machine' && !known) {
        effects.push(
          { kind: 'withdraw', topic: `${key}/state` },
          { kind: 'withdraw', topic: `${key}/finding` },
        );
      }
      continue;
    }
    if (of === 'alarm') alarms[key] = row as AlarmRow;
    else if (of === 'point') points[key] = row as EngineState['points'][string];
    else if (of === 'machine') machines[key] = { ...NEW_MACHINE, ...row } as EngineState['machines'][string];
    else quiet = row as EngineState['quiet'];
  }
  const waiting = Object.keys(alarms).filter((key) => signature(alarms[key]!) !== alarms[key]!.told);
  const work = new StepWork(plan, { alarms, points, machines, quiet, waiting }, t, allocateId);
  settle(work);
  const settled = work.finish();
  return { state: settled.state, effects: [...effects, ...settled.effects] };
}

/** The same for a state at work, when the configuration changes under it. */
export function replanAlarms(
  plan: AlarmPlan,
  state: EngineState,
  t: string,
  allocateId: AllocateId,
): EngineStep {
  const rows = (of: 'alarm' | 'point' | 'machine', from: Readonly<Record<string, object>>) =>
    Object.entries(from).map(([key, row]) => [`${of}:${key}`, { v: ROW_VERSION, of, ...row } as StoredRow]);
  const all: Record<string, StoredRow> = {
    ...Object.fromEntries([
      ...rows('alarm', state.alarms),
      ...rows('point', state.points),
      ...rows('machine', state.machines),
    ]),
    'quiet:': { v: ROW_VERSION, of: 'quiet', ...state.quiet },
  };
  return restoreAlarms(plan, all, t, allocateId);
}
