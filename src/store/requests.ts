/** What passes between the main thread and the store worker. Small and typed: `{id, op, args}` there, a reply back. */

import type { ErrorCode } from '../config/errors.ts';
import type { Database } from './database.ts';
import type { Commit, StoreEngine, StoreLimits } from './types.ts';

export interface StoreSettings {
  directory: string;
  maxMb: number;
  limits: StoreLimits;
}

export type Operation = keyof StoreEngine;

export interface Request {
  id: number;
  op: Operation;
  args: readonly unknown[];
}

export type Reply =
  | { id: number; ok: true; value: unknown }
  | { id: number; ok: false; code: ErrorCode | null; message: string };

/** Must it be on the disk at once? Everything about alarms; the rest may wait to share a flush. */
export function urgent(commit: Commit): boolean {
  return (
    (commit.alarmStates?.length ?? 0) > 0 ||
    (commit.journal?.length ?? 0) > 0 ||
    (commit.baselines?.length ?? 0) > 0 ||
    commit.nextN !== undefined ||
    (commit.outbox ?? []).some((message) => message.class === 'alarm' || message.class === 'answer')
  );
}

export function run(database: Database, request: Request): unknown {
  const method = database[request.op] as (...args: readonly unknown[]) => unknown;
  return method.apply(database, request.args as unknown[]);
}
