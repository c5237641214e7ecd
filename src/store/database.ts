/** The store in SQLite, synchronous: it lives in the store worker, or straight in a test. */

import { randomInt } from 'node:crypto';
import type { Database as Sqlite } from 'better-sqlite3';
import { ForebayError } from '../config/errors.ts';
import { lockDirectory, openFile, storeError } from './open-file.ts';
import { Outbox } from './outbox.ts';
import { Records } from './records.ts';
import { migrate } from './schema.ts';
import type {
  BatchQuery,
  BudgetLine,
  Commit,
  JournalEntry,
  JournalQuery,
  MessageClass,
  OpenReport,
  OutboxRow,
  RecentTrendQuery,
  StoreCounters,
  StoreEngine,
  StoreLimits,
  TrendPoint,
  TrendQuery,
} from './types.ts';

export interface DatabaseOptions {
  directory: string;
  maxMb: number;
  limits: StoreLimits;
  /** Monotonic seconds from any origin. */
  monotonicS?: () => number;
}

interface Opened {
  db: Sqlite;
  lock: Sqlite;
  outbox: Outbox;
  records: Records;
}

export class Database implements StoreEngine {
  readonly #options: DatabaseOptions;
  readonly #monotonicS: () => number;
  #opened: Opened | null = null;
  /** Run time at the monotonic time `#originS`. */
  #runAtOpenS = 0;
  #originS = 0;

  constructor(options: DatabaseOptions) {
    this.#options = options;
    this.#monotonicS = options.monotonicS ?? (() => Number(process.hrtime.bigint()) / 1e9);
  }

  open(leastRunS = 0): OpenReport {
    if (this.#opened !== null) throw new Error('the store is open already');
    const { directory, maxMb, limits } = this.#options;
    const lock = lockDirectory(directory);
    let db: Sqlite | undefined;
    try {
      const file = openFile(directory, maxMb * 1e6);
      db = file.db;
      migrate(db, drawStoreId);
      const meta = (key: string) => db!.prepare('SELECT value FROM meta WHERE key = ?').pluck().get(key);
      this.#runAtOpenS = Math.max(Number(meta('run_s')), leastRunS);
      this.#originS = this.#monotonicS();
      this.#opened = { db, lock, outbox: new Outbox(db, limits), records: new Records(db, limits) };
      const report: OpenReport = {
        storeId: String(meta('store')),
        nextN: Number(meta('next_n')),
        runS: this.#runAtOpenS,
      };
      return file.setAside === undefined ? report : { ...report, setAside: file.setAside };
    } catch (error) {
      db?.close();
      lock.close();
      throw storeError(error, directory);
    }
  }

  /** Several operations in one transaction; used by the worker to share one flush among commits. */
  together<T>(work: () => T): T {
    const { db } = this.#open();
    return this.#guard(() => (db.inTransaction ? work() : db.transaction(work).immediate()));
  }

  commit(commit: Commit): void {
    this.together(() => {
      const { db, outbox, records } = this.#open();
      const runS = this.#runS();
      outbox.add(commit.outbox ?? [], runS);
      records.write(commit, runS);
      const highest = Math.max(
        commit.nextN ?? 0,
        ...(commit.outbox ?? []).map((row) => row.n + 1),
        ...(commit.journal ?? []).map((entry) => entry.n + 1),
      );
      db.prepare("UPDATE meta SET value = max(value, ?) WHERE key = 'next_n'").run(highest);
      db.prepare("UPDATE meta SET value = ? WHERE key = 'run_s'").run(runS);
      outbox.bound(runS);
      records.bound(runS);
    });
  }

  batch(query: BatchQuery): OutboxRow[] {
    return this.#guard(() => this.#open().outbox.batch(query, this.#runS()));
  }

  accept(ns: readonly number[]): void {
    this.together(() => this.#open().outbox.accept(ns));
  }

  reject(n: number, reason: string, poison: boolean): void {
    this.together(() => this.#open().outbox.reject(n, reason, poison));
  }

  releaseRefused(): number {
    return this.together(() => this.#open().outbox.releaseRefused());
  }

  releaseHungUp(): number {
    return this.together(() => this.#open().outbox.releaseHungUp());
  }

  resendRetained(): number {
    return this.together(() => this.#open().outbox.resendRetained(this.#runS()));
  }

  retainedTopics(): { topic: string; class: MessageClass }[] {
    return this.#guard(() => this.#open().outbox.retainedTopics());
  }

  counters(): StoreCounters {
    return this.#guard(() => {
      const { outbox, records } = this.#open();
      return { ...outbox.counters(this.#runS()), ...records.counters() };
    });
  }

  alarmStates(): Record<string, string> {
    return this.#guard(() => this.#open().records.alarmStates());
  }

  baselines(): Record<string, string> {
    return this.#guard(() => this.#open().records.baselines());
  }

  journal(query: JournalQuery): JournalEntry[] {
    return this.#guard(() => this.#open().records.journal(query));
  }

  trend(query: TrendQuery): TrendPoint[] {
    return this.#guard(() => this.#open().records.trend(query));
  }

  recentTrend(query: RecentTrendQuery): TrendPoint[] {
    return this.#guard(() => this.#open().records.recentTrend(query));
  }

  budget(day: number): BudgetLine[] {
    return this.#guard(() => this.#open().records.budget(day));
  }

  close(): void {
    if (this.#opened === null) return;
    const { db, lock } = this.#opened;
    this.#opened = null;
    db.close();
    lock.close();
  }

  #runS(): number {
    return this.#runAtOpenS + (this.#monotonicS() - this.#originS);
  }

  #open(): Opened {
    if (this.#opened === null) throw new ForebayError('store.stopped', 'the store is not open');
    return this.#opened;
  }

  #guard<T>(work: () => T): T {
    try {
      return work();
    } catch (error) {
      throw storeError(error, this.#options.directory);
    }
  }
}

/** Six characters of `[a-z0-9]`: two stores of one site differ but for one chance in two thousand million. */
export function drawStoreId(): string {
  const letters = 'abcdefghijklmnopqrstuvwxyz0123456789';
  return Array.from({ length: 6 }, () => letters[randomInt(letters.length)]).join('');
}
