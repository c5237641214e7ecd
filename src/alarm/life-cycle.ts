/**
 * The life of one alarm, after the states of alarm management practice (IEC 62682, ISA-18.2), as a pure function.
 *
 * The condition is remembered in every state, so that whatever ends a withholding (shelf, suppression, out of
 * service) leads to `normal` or `unacknowledged` by how things are then. Withholdings may overlap; out of service
 * outranks the shelf, the shelf outranks suppression, and lifting one uncovers the next.
 */

import type { Level } from '../config/station.ts';

/** In order of rank. */
const WITHHOLDINGS = ['out-of-service', 'shelved', 'suppressed-by-design'] as const;
type Withholding = (typeof WITHHOLDINGS)[number];

export type LifeState =
  | { readonly state: 'normal' }
  /** A latched alarm stays here, and in `acknowledged`, with `condition: null` until it is reset. */
  | { readonly state: 'unacknowledged'; readonly level: Level; readonly condition: Level | null }
  | { readonly state: 'acknowledged'; readonly level: Level; readonly condition: Level | null }
  | { readonly state: 'returned-unacknowledged'; readonly level: Level }
  | {
      readonly state: Withholding;
      readonly condition: Level | null;
      readonly withheld: readonly Withholding[];
      /** The level that a latched alarm has kept; null: nothing to keep. */
      readonly latched: Level | null;
    };

export type LifeInput =
  | { readonly kind: 'condition-on'; readonly level: Level }
  | { readonly kind: 'condition-off' }
  | { readonly kind: 'acknowledge' }
  | { readonly kind: 'reset' }
  | { readonly kind: 'withhold'; readonly why: Withholding }
  | { readonly kind: 'restore'; readonly why: Withholding };

export interface LifeStep {
  readonly state: LifeState;
  /** Anything that a person would want to be told. */
  readonly changed: boolean;
  /** It asks for an acknowledgement anew. */
  readonly announced: boolean;
}

export const NORMAL: LifeState = { state: 'normal' };

/** One step of the life of an alarm. `latching`: it stays until it is reset. Never throws. */
export function stepLife(from: LifeState, input: LifeInput, latching: boolean): LifeStep {
  switch (input.kind) {
    case 'condition-on':
      return on(from, input.level, latching);
    case 'condition-off':
      return off(from, latching);
    case 'acknowledge':
      if (from.state === 'unacknowledged') return told({ ...from, state: 'acknowledged' });
      return from.state === 'returned-unacknowledged' ? told(NORMAL) : same(from);
    case 'reset':
      return reset(from);
    case 'withhold':
      return withhold(from, input.why, latching);
    case 'restore':
      return restore(from, input.why);
  }
}

const same = (state: LifeState): LifeStep => ({ state, changed: false, announced: false });
const told = (state: LifeState): LifeStep => ({ state, changed: true, announced: false });
const announce = (level: Level, condition: Level | null): LifeStep => ({
  state: { state: 'unacknowledged', level, condition },
  changed: true,
  announced: true,
});

function on(from: LifeState, level: Level, latching: boolean): LifeStep {
  switch (from.state) {
    case 'normal':
    case 'returned-unacknowledged':
      return announce(level, level);
    case 'unacknowledged':
    case 'acknowledged': {
      if (from.condition === level) return same(from);
      if (level === 'danger' && from.level === 'alert') return announce(level, level);
      // A fall from danger to alert is told, not announced; a latched alarm keeps its worst.
      const kept = latching ? from.level : level;
      const state = { ...from, level: kept, condition: level };
      return kept === from.level ? same(state) : told(state);
    }
    default: {
      const latched = latching ? worse(from.latched, level) : null;
      const state = { ...from, condition: level, latched };
      return from.condition === level ? same(state) : told(state);
    }
  }
}

function off(from: LifeState, latching: boolean): LifeStep {
  switch (from.state) {
    case 'normal':
    case 'returned-unacknowledged':
      return same(from);
    case 'unacknowledged':
      if (latching && from.condition === null) return same(from);
      return latching
        ? same({ ...from, condition: null })
        : told({ state: 'returned-unacknowledged', level: from.level });
    case 'acknowledged':
      if (latching && from.condition === null) return same(from);
      return latching ? same({ ...from, condition: null }) : told(NORMAL);
    default:
      return from.condition === null ? same(from) : told({ ...from, condition: null });
  }
}

function reset(from: LifeState): LifeStep {
  switch (from.state) {
    case 'unacknowledged':
      return from.condition === null
        ? told({ state: 'returned-unacknowledged', level: from.level })
        : same(from);
    case 'acknowledged':
      return from.condition === null ? told(NORMAL) : same(from);
    case 'normal':
    case 'returned-unacknowledged':
      return same(from);
    default:
      return from.latched !== null && from.condition === null ? told({ ...from, latched: null }) : same(from);
  }
}

function withhold(from: LifeState, why: Withholding, latching: boolean): LifeStep {
  if ('withheld' in from) {
    if (from.withheld.includes(why)) return same(from);
    const withheld = WITHHOLDINGS.filter((w) => w === why || from.withheld.includes(w));
    const state = { ...from, state: withheld[0]!, withheld };
    return state.state === from.state ? same(state) : told(state);
  }
  const condition = 'condition' in from ? from.condition : null;
  const latched = latching && 'level' in from && from.state !== 'returned-unacknowledged' ? from.level : null;
  return told({ state: why, condition, withheld: [why], latched });
}

function restore(from: LifeState, why: Withholding): LifeStep {
  if (!('withheld' in from) || !from.withheld.includes(why)) return same(from);
  const withheld = from.withheld.filter((w) => w !== why);
  if (withheld.length > 0) {
    const state = { ...from, state: withheld[0]!, withheld };
    return state.state === from.state ? same(state) : told(state);
  }
  const level = worse(from.latched, from.condition);
  return level === null ? told(NORMAL) : announce(level, from.condition);
}

/** The worse of two levels; null is none. */
export function worse(a: Level | null, b: Level | null): Level | null {
  return a === 'danger' || b === 'danger' ? 'danger' : (a ?? b);
}

/** Level of an alarm that stands, whether acknowledged or not; null where it is normal, returned or withheld. */
export function standingLevel(life: LifeState): Level | null {
  return life.state === 'unacknowledged' || life.state === 'acknowledged' ? life.level : null;
}
