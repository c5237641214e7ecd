/** One step in the making: reads through to the state before, collects what changes. Lives for one step only. */

import type { AlarmEffect, AllocateId } from './effects.ts';
import type { AlarmPlan } from './plan.ts';
import {
  type AlarmRow,
  type EngineState,
  type MachineRow,
  NEW_ALARM,
  NEW_MACHINE,
  NEW_POINT,
  type PointRow,
  type QuietRow,
  ROW_VERSION,
} from './state.ts';

export class StepWork {
  readonly effects: AlarmEffect[] = [];
  /** Machines whose state may have changed. */
  readonly touched = new Set<string>();
  /** Id of the change of an alarm in this step, so that what is published at once carries the journal's id. */
  readonly changeIds = new Map<string, string>();
  /** Alarms that a person acted on in this step. */
  readonly asked = new Set<string>();
  /** The step is a tick, with which details of a machine's state are told. */
  ticked = false;
  waiting: readonly string[];
  quiet: QuietRow;
  readonly #alarms = new Map<string, AlarmRow>();
  readonly #points = new Map<string, PointRow>();
  readonly #machines = new Map<string, MachineRow>();
  readonly #urgent = new Set<string>();

  constructor(
    readonly plan: AlarmPlan,
    readonly before: EngineState,
    readonly t: string,
    readonly allocateId: AllocateId,
  ) {
    this.waiting = before.waiting;
    this.quiet = before.quiet;
  }

  alarm(key: string): AlarmRow {
    return this.#alarms.get(key) ?? this.before.alarms[key] ?? NEW_ALARM;
  }

  point(key: string): PointRow {
    return this.#points.get(key) ?? this.before.points[key] ?? NEW_POINT;
  }

  machine(id: string): MachineRow {
    return this.#machines.get(id) ?? this.before.machines[id] ?? NEW_MACHINE;
  }

  setAlarm(key: string, row: AlarmRow, urgent: boolean): void {
    this.#alarms.set(key, row);
    if (urgent) this.#urgent.add(`alarm:${key}`);
  }

  setPoint(key: string, row: PointRow, urgent: boolean): void {
    this.#points.set(key, row);
    if (urgent) this.#urgent.add(`point:${key}`);
  }

  setMachine(id: string, row: MachineRow, urgent: boolean): void {
    this.#machines.set(id, row);
    if (urgent) this.#urgent.add(`machine:${id}`);
  }

  /** An alarm has something to tell. */
  wait(key: string): void {
    if (!this.waiting.includes(key)) this.waiting = [...this.waiting, key];
  }

  finish(): { state: EngineState; effects: readonly AlarmEffect[] } {
    const state: EngineState = {
      alarms: this.#merge('alarm', this.#alarms, this.before.alarms, NEW_ALARM),
      points: this.#merge('point', this.#points, this.before.points, NEW_POINT),
      machines: this.#merge('machine', this.#machines, this.before.machines, NEW_MACHINE),
      quiet: this.quiet,
      waiting: this.waiting,
    };
    if (this.quiet !== this.before.quiet) {
      const row = { v: ROW_VERSION, of: 'quiet' as const, ...this.quiet };
      this.effects.push({ kind: 'row', key: 'quiet:', row, urgent: false });
    }
    return { state, effects: this.effects };
  }

  #merge<T extends AlarmRow | PointRow | MachineRow>(
    of: 'alarm' | 'point' | 'machine',
    changed: ReadonlyMap<string, T>,
    before: Readonly<Record<string, T>>,
    blank: T,
  ): Readonly<Record<string, T>> {
    const fresh = [...changed].filter(([key, row]) => !sameRow(before[key] ?? blank, row));
    if (fresh.length === 0) return before;
    for (const [key, row] of fresh) {
      const rowKey = `${of}:${key}`;
      const stored = { v: ROW_VERSION, of, ...row } as Extract<AlarmEffect, { kind: 'row' }>['row'];
      this.effects.push({ kind: 'row', key: rowKey, row: stored, urgent: this.#urgent.has(rowKey) });
    }
    return { ...before, ...Object.fromEntries(fresh) };
  }
}

/** Shallow: a field that did not change is the same object. */
function sameRow<T extends object>(a: T, b: T): boolean {
  return (Object.keys(b) as (keyof T)[]).every((key) => Object.is(a[key], b[key]));
}
