/**
 * What the engine remembers: rows of plain JSON, each written for itself. Elapsed seconds are kept, never deadlines,
 * so that a row means the same after a power cut of any length.
 */

import type { Level } from '../config/station.ts';
import type { Finding } from '../machine/finding-evidence.ts';
import type { Zone } from '../machine/severity.ts';
import { type ConditionState, NO_CONDITION } from './condition.ts';
import { type LifeState, NORMAL } from './life-cycle.ts';
import type { AlarmFacts } from './payload.ts';

export const ROW_VERSION = 1;

export interface AlarmRow {
  readonly life: LifeState;
  readonly condition: ConditionState;
  /** What was told of it last, or is waiting to be; null: never anything. */
  readonly facts: AlarmFacts | null;
  /** Id of the change that made it unacknowledged; null: it never was. */
  readonly raised: string | null;
  readonly acknowledgedBy: string | null;
  readonly shelf: { readonly by: string; readonly leftS: number } | null;
  readonly service: { readonly by: string; readonly why: string } | null;
  /** Why it is suppressed by design; null: it is not. */
  readonly suppressedBy: 'stop' | 'group' | null;
  readonly test: {
    readonly level: Level;
    readonly id: string;
    readonly t: string;
    readonly leftS: number;
  } | null;
  /** Ages of the announcements of the last minute, and how long the condition has been off since it chattered. */
  readonly chatter: { readonly agesS: readonly number[]; readonly quietS: number | null };
  /** Signature of what was published last. */
  readonly told: string;
}

export interface PointRow {
  readonly running: boolean | null;
  /** The last word on it, whatever came since. */
  readonly wasRunning: boolean | null;
  /** Sample time since a start whose delay is not over; null: no start. */
  readonly startedS: number | null;
  /** Sample time for which readings have not counted by design. */
  readonly uncountedS: number;
  readonly shaftHz: number | null;
  readonly zone: Zone | null;
  /** Readings in a row without a valid figure while the machine may run; counted up to where it matters. */
  readonly invalid: number;
  readonly service: AlarmRow['service'];
}

export interface MachineRow {
  readonly running: boolean | null;
  /** The last word on it, whatever came since. */
  readonly wasRunning: boolean | null;
  readonly since: string | null;
  readonly runS: number;
  /** The day of the labels that `starts` counts in. */
  readonly day: string;
  readonly starts: number;
  /** The point whose sample time counts the hours, and how many readings of others came since its last. */
  readonly clock: { readonly point: string; readonly missed: number } | null;
  readonly findings: FindingsRow;
  /** The machine as a whole is out of service, and so is what a later configuration gives it. */
  readonly service: AlarmRow['service'];
  readonly told: string;
  readonly sinceToldS: number;
}

export interface FindingsRow {
  /** Faults of the last evaluations, oldest first. */
  readonly recent: readonly (readonly Pick<Finding, 'fault' | 'likelihood'>[])[];
  readonly standing: readonly Finding[];
}

export interface QuietRow {
  /** By machine (`agent` for the rest): ages of what was sent, and whether an alarm. −1: since the last tick. */
  readonly sent: Readonly<Record<string, readonly { readonly ageS: number; readonly alarm: boolean }[]>>;
  /** Ages of the newly unacknowledged of the whole station. */
  readonly announced: readonly number[];
}

export interface EngineState {
  readonly alarms: Readonly<Record<string, AlarmRow>>;
  readonly points: Readonly<Record<string, PointRow>>;
  readonly machines: Readonly<Record<string, MachineRow>>;
  readonly quiet: QuietRow;
  /** Alarms with something untold. Derived from the rows at a restart. */
  readonly waiting: readonly string[];
}

export const NEW_ALARM: AlarmRow = {
  life: NORMAL,
  condition: NO_CONDITION,
  facts: null,
  raised: null,
  acknowledgedBy: null,
  shelf: null,
  service: null,
  suppressedBy: null,
  test: null,
  chatter: { agesS: [], quietS: null },
  told: 'normal',
};

export const NEW_POINT: PointRow = {
  running: null,
  wasRunning: null,
  startedS: null,
  uncountedS: 0,
  shaftHz: null,
  zone: null,
  invalid: 0,
  service: null,
};

export const NEW_MACHINE: MachineRow = {
  running: null,
  wasRunning: null,
  since: null,
  runS: 0,
  day: '',
  starts: 0,
  clock: null,
  findings: { recent: [], standing: [] },
  service: null,
  told: '',
  sinceToldS: 0,
};

export const NEW_QUIET: QuietRow = { sent: {}, announced: [] };

/** What stands for a row's present state where it is compared with what was told. */
export function signature(row: AlarmRow): string {
  if (row.test !== null) return `test ${row.test.id}`;
  const { life } = row;
  if (life.state === 'normal') return 'normal';
  if ('withheld' in life) return `${life.state} ${life.condition}`;
  return `${life.state} ${life.level} ${row.raised} ${row.facts?.members ?? ''}`;
}
