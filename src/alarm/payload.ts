/** The payloads of topics.md that this room makes: alarm, machine state, finding. Exactly those keys. */

import type { Level } from '../config/station.ts';
import type { Finding } from '../machine/finding-evidence.ts';
import type { Zone } from '../machine/severity.ts';
import { rounded } from '../signal/rounded.ts';
import type { LifeState } from './life-cycle.ts';
import type { AlarmRow } from './state.ts';

type AlarmStateName = LifeState['state'];

export interface AlarmPayload {
  id: string;
  t: string;
  state: AlarmStateName;
  level: Level | null;
  value: number | string | null;
  limit: number | null;
  unit: string | null;
  raised: string | null;
  since: string | null;
  acknowledged_by: string | null;
  reason: string;
  check: string;
  snapshot: string | null;
  test?: true;
}

export interface MachineStatePayload {
  id: string;
  t: string;
  running: boolean | null;
  since: string | null;
  hours_run: number;
  starts_today: number;
  severity: 0 | 1 | 2 | 3;
  zone: Zone | null;
  worst: string | null;
  unacknowledged: number;
  finding: string | null;
}

export interface FindingPayload {
  id: string;
  t: string;
  findings: readonly Finding[];
}

/** What a change of an alarm says beside its state. */
export interface AlarmFacts {
  readonly t: string;
  readonly value: number | string | null;
  readonly limit: number | null;
  readonly unit: string | null;
  readonly since: string | null;
  readonly reason: string;
  readonly check: string;
  /** How many points a group alarm stands for. */
  readonly members?: number;
}

/** The alarm payload of a row as it is now. */
export function alarmPayload(row: AlarmRow, id: string, t: string): AlarmPayload {
  const { life, facts, test } = row;
  if (test !== null) return testPayload(test.level, test.id, test.t, id);
  const value = facts?.value ?? null;
  const level = 'level' in life ? life.level : 'condition' in life ? life.condition : null;
  return {
    id,
    t: facts?.t ?? t,
    state: life.state,
    level,
    value: typeof value === 'number' ? rounded(value) : value,
    limit: facts?.limit ?? null,
    unit: facts?.unit ?? null,
    raised: row.raised,
    since: life.state === 'normal' ? null : (facts?.since ?? null),
    acknowledged_by: row.acknowledgedBy,
    reason: facts?.reason ?? '',
    check: facts?.check ?? '',
    snapshot: null,
  };
}

function testPayload(level: Level, raised: string, t: string, id: string): AlarmPayload {
  return {
    id,
    t,
    state: 'unacknowledged',
    level,
    value: null,
    limit: null,
    unit: null,
    raised,
    since: t,
    acknowledged_by: null,
    reason: 'test of the alarm chain: nothing was measured',
    check: 'Acknowledge it where it shows; it ends by itself after five minutes.',
    snapshot: null,
    test: true,
  };
}
