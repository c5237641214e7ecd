/** The condition of one alarm: readings in, the level that they have made good over their delays out. */

import type { Level, Rule } from '../config/station.ts';
import { type Debounce, debounce, QUIET } from './debounce.ts';

export interface ConditionState {
  readonly alert: Debounce;
  readonly danger: Debounce;
  /** Under a k-of-n rule: the last n readings that counted, oldest first. */
  readonly recent: readonly { readonly t: string; readonly alert: boolean; readonly danger: boolean }[];
}

export const NO_CONDITION: ConditionState = { alert: QUIET, danger: QUIET, recent: [] };

/** What of a rule the condition needs. */
export type Timing = Pick<Rule, 'onDelayS' | 'offDelayS' | 'readings'>;

/** What a reading says: over a limit, and still within its deadband (which matters only to clear). */
export interface Says {
  readonly over: Readonly<Record<Level, boolean>>;
  readonly near: Readonly<Record<Level, boolean>>;
}

/** One reading that counts; see {@link debounce} for what passes no reading in. */
export function stepCondition(
  from: ConditionState,
  timing: Timing,
  says: Says,
  elapsedS: number | null,
  t: string,
): ConditionState {
  const shows = (level: Level) => (from[level].on ? says.near[level] : says.over[level]);
  if (timing.readings === null) {
    const alert = debounce(from.alert, shows('alert'), elapsedS, t, timing);
    const danger = debounce(from.danger, shows('danger'), elapsedS, t, timing);
    return changed(from, { alert, danger, recent: from.recent });
  }
  const [k, n] = timing.readings;
  const entry = { t, alert: shows('alert'), danger: shows('danger') };
  const recent = [...from.recent, entry].slice(-n);
  const step = (level: Level) => {
    const hits = recent.filter((reading) => reading[level]);
    return debounce(from[level], hits.length >= k, elapsedS, hits[0]?.t ?? t, timing);
  };
  // A quiet past needs no keeping: nothing is written while nothing happens.
  const kept = recent.some((reading) => reading.alert || reading.danger) ? recent : NO_CONDITION.recent;
  return changed(from, { alert: step('alert'), danger: step('danger'), recent: kept });
}

/** The same object while nothing happens, so that nothing is written. */
function changed(from: ConditionState, to: ConditionState): ConditionState {
  const same = from.alert === to.alert && from.danger === to.danger;
  return same && (from.recent === to.recent || from.recent.length + to.recent.length === 0) ? from : to;
}

/** The level that holds after the delays; null: none. */
export function conditionLevel(state: ConditionState): Level | null {
  if (state.danger.on) return 'danger';
  return state.alert.on ? 'alert' : null;
}
