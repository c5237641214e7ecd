/** What waits to be judged, and what of it is missed least where too much does. */

import type { AlarmEffect, AlarmInput } from '../alarm/effects.ts';
import type { AlarmPlan } from '../alarm/plan.ts';

export type Waiting = { resolve(effects: readonly AlarmEffect[]): void } & (
  | { input: AlarmInput }
  /** What came before is judged by the old plan, what comes after by this one. */
  | { plan: AlarmPlan; t: string }
);

type Tick = Extract<AlarmInput, { kind: 'tick' }>;

/**
 * Takes out one input. The oldest reading first, for another follows; links and the gateway report only what changes, so
 * the newest word of each stays, and is all that matters of them.
 *
 * @returns undefined where nothing may go.
 */
export function giveUpOne(queue: Waiting[]): Waiting | undefined {
  const newest = new Map<string, number>();
  for (const [index, waiting] of queue.entries()) {
    const subject = subjectOf(waiting);
    if (subject !== null) newest.set(subject, index);
  }
  const superseded = (waiting: Waiting, index: number) => {
    const subject = subjectOf(waiting);
    return subject !== null && newest.get(subject) !== index;
  };
  const choices = [
    isFollowed,
    superseded,
    (waiting: Waiting) => 'input' in waiting && subjectOf(waiting) === null,
  ];
  for (const choice of choices) {
    const index = queue.findIndex(choice);
    if (index < 0) continue;
    const [given] = queue.splice(index, 1);
    joinTicks(queue, index);
    return given;
  }
  return undefined;
}

/** Two ticks with nothing between them, as one. */
export function asOneTick(earlier: Waiting | undefined, later: AlarmInput): Tick | null {
  if (earlier === undefined || !('input' in earlier)) return null;
  const { input } = earlier;
  if (input.kind !== 'tick' || later.kind !== 'tick') return null;
  return { ...later, elapsedS: input.elapsedS + later.elapsedS };
}

function joinTicks(queue: Waiting[], index: number): void {
  const later = queue[index];
  const earlier = queue[index - 1];
  const joined = later && 'input' in later ? asOneTick(earlier, later.input) : null;
  if (joined === null) return;
  queue.splice(index - 1, 2, { ...later!, input: joined });
  earlier!.resolve([]);
}

function isFollowed(waiting: Waiting): boolean {
  return 'input' in waiting && ['reading', 'findings', 'trend'].includes(waiting.input.kind);
}

function subjectOf(waiting: Waiting): string | null {
  if (!('input' in waiting)) return null;
  const { input } = waiting;
  if (input.kind === 'link') return `link ${input.link}`;
  return input.kind === 'gateway' ? `gateway ${input.condition}` : null;
}
