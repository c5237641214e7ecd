/** One change of one alarm: its life, what is told of it, its journal entry. */

import type { Reading } from '../measure/reading.ts';
import { type LifeInput, stepLife } from './life-cycle.ts';
import { type AlarmFacts, alarmPayload } from './payload.ts';
import type { AlarmDefinition } from './plan.ts';
import type { AlarmRow } from './state.ts';
import type { StepWork } from './work.ts';

/** What a change says; what is left out stays as it was told before. */
export type Words = Partial<Omit<AlarmFacts, 't'>>;

const NO_FACTS = { value: null, limit: null, unit: null, since: null, reason: '', check: '' };

/**
 * Puts inputs to an alarm's life; together they are one change. `patch` is kept in any case.
 *
 * @returns whether it asks for an acknowledgement anew.
 */
export function changeAlarm(
  work: StepWork,
  definition: AlarmDefinition,
  inputs: readonly LifeInput[],
  words: Words,
  options: { readonly patch?: Partial<AlarmRow>; readonly reading?: Reading; readonly retell?: boolean } = {},
): boolean {
  const { key } = definition;
  const before = { ...work.alarm(key), ...options.patch };
  let life = before.life;
  let changed = options.retell ?? false;
  let announced = false;
  for (const input of inputs) {
    const step = stepLife(life, input, definition.latched);
    life = step.state;
    changed ||= step.changed;
    announced ||= step.announced;
  }
  // What was announced and withheld within one change was never announced.
  announced &&= life.state === 'unacknowledged';
  if (!changed) {
    work.setAlarm(key, { ...before, life }, false);
    return false;
  }
  const id = work.allocateId();
  const facts = { ...NO_FACTS, ...before.facts, ...words, t: work.t };
  const row: AlarmRow = {
    ...before,
    life,
    facts,
    raised: announced ? id : before.raised,
    acknowledgedBy: announced ? null : before.acknowledgedBy,
    // A true change ends a test.
    test: null,
  };
  work.setAlarm(key, row, true);
  recordChange(work, definition, row, id, options.reading ?? null);
  return announced;
}

/** Journals a change and puts it in line to be told. */
export function recordChange(
  work: StepWork,
  definition: AlarmDefinition,
  row: AlarmRow,
  id: string,
  reading: Reading | null,
): void {
  const { key } = definition;
  const entry = {
    kind: 'alarm' as const,
    id,
    t: work.t,
    key,
    payload: alarmPayload(row, id, work.t),
    reading,
  };
  work.effects.push({ kind: 'journal', entry });
  work.changeIds.set(key, id);
  work.wait(key);
  if (definition.kind !== 'agent') work.touched.add(definition.machine.id);
}
