import { Worker } from 'node:worker_threads';
import { ForebayError } from '../config/errors.ts';
import { type Operation, type Reply, type Request, type StoreSettings, urgent } from './requests.ts';
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
  Store,
  StoreCounters,
  TrendPoint,
  TrendQuery,
} from './types.ts';

export interface WorkerStoreOptions extends StoreSettings {
  /** The compiled worker; beside this file unless told otherwise. */
  workerUrl?: URL;
  /** Requests under way at most; beyond it all but alarms are refused with `store.busy`. */
  maxPending?: number;
  /** The worker ended without being asked to. What was under way has failed with `store.stopped`; `open` starts anew. */
  onDown?: (error: Error) => void;
}

interface Waiting {
  resolve(value: unknown): void;
  reject(error: Error): void;
}

/** The store as the main thread sees it: every call is a message to the one thread that owns SQLite. */
export class WorkerStore implements Store {
  readonly #options: WorkerStoreOptions;
  readonly #maxPending: number;
  readonly #waiting = new Map<number, Waiting>();
  #worker: Worker | null = null;
  #closing = false;
  #lastId = 0;

  constructor(options: WorkerStoreOptions) {
    this.#options = options;
    this.#maxPending = options.maxPending ?? 512;
  }

  async open(leastRunS = 0): Promise<OpenReport> {
    if (this.#worker !== null) throw new Error('the store is open already');
    const { directory, maxMb, limits } = this.#options;
    const worker = new Worker(this.#options.workerUrl ?? new URL('./store-worker.js', import.meta.url), {
      workerData: { directory, maxMb, limits } satisfies StoreSettings,
    });
    this.#worker = worker;
    this.#closing = false;
    worker.on('message', (reply: Reply) => this.#settle(reply));
    let cause: Error | undefined;
    worker.on('error', (error: Error) => {
      cause = error;
    });
    worker.on('exit', () => this.#ended(worker, cause));
    try {
      return (await this.#ask('open', [leastRunS])) as OpenReport;
    } catch (error) {
      this.#closing = true;
      await worker.terminate();
      throw error;
    }
  }

  async commit(commit: Commit): Promise<void> {
    if (this.#waiting.size >= this.#maxPending && !urgent(commit)) {
      throw new ForebayError('store.busy', `${this.#waiting.size} requests to the database are under way`);
    }
    // A view into a pool would be sent with the whole pool behind it.
    const outbox = commit.outbox?.map((message) => ({
      ...message,
      payload: new Uint8Array(message.payload),
    }));
    await this.#ask('commit', [outbox === undefined ? commit : { ...commit, outbox }]);
  }

  async batch(query: BatchQuery): Promise<OutboxRow[]> {
    return (await this.#ask('batch', [query])) as OutboxRow[];
  }

  async accept(ns: readonly number[]): Promise<void> {
    await this.#ask('accept', [ns]);
  }

  async reject(n: number, reason: string, { poison }: { poison: boolean }): Promise<void> {
    await this.#ask('reject', [n, reason, poison]);
  }

  async releaseRefused(): Promise<number> {
    return (await this.#ask('releaseRefused', [])) as number;
  }

  async releaseHungUp(): Promise<number> {
    return (await this.#ask('releaseHungUp', [])) as number;
  }

  async resendRetained(): Promise<number> {
    return (await this.#ask('resendRetained', [])) as number;
  }

  async retainedTopics(): Promise<{ topic: string; class: MessageClass }[]> {
    return (await this.#ask('retainedTopics', [])) as { topic: string; class: MessageClass }[];
  }

  async counters(): Promise<StoreCounters> {
    return (await this.#ask('counters', [])) as StoreCounters;
  }

  async alarmStates(): Promise<Record<string, string>> {
    return (await this.#ask('alarmStates', [])) as Record<string, string>;
  }

  async baselines(): Promise<Record<string, string>> {
    return (await this.#ask('baselines', [])) as Record<string, string>;
  }

  async journal(query: JournalQuery): Promise<JournalEntry[]> {
    return (await this.#ask('journal', [query])) as JournalEntry[];
  }

  async recentTrend(query: RecentTrendQuery): Promise<TrendPoint[]> {
    return (await this.#ask('recentTrend', [query])) as TrendPoint[];
  }

  async trend(query: TrendQuery): Promise<TrendPoint[]> {
    return (await this.#ask('trend', [query])) as TrendPoint[];
  }

  async budget(day: number): Promise<BudgetLine[]> {
    return (await this.#ask('budget', [day])) as BudgetLine[];
  }

  async close(): Promise<void> {
    const worker = this.#worker;
    if (worker === null) return;
    this.#closing = true;
    const ended = new Promise<void>((resolve) => worker.once('exit', () => resolve()));
    // A worker that dies on the way out has closed the database all the same.
    await this.#ask('close', []).catch(() => undefined);
    await ended;
  }

  /** Ends the thread at once, when closing takes too long. What was acknowledged is on the disk. */
  async terminate(): Promise<void> {
    this.#closing = true;
    await this.#worker?.terminate();
  }

  #ask(op: Operation, args: readonly unknown[]): Promise<unknown> {
    const worker = this.#worker;
    if (worker === null) return Promise.reject(new ForebayError('store.stopped', 'the store is not open'));
    const id = ++this.#lastId;
    return new Promise((resolve, reject) => {
      this.#waiting.set(id, { resolve, reject });
      worker.postMessage({ id, op, args } satisfies Request);
    });
  }

  #settle(reply: Reply): void {
    const waiting = this.#waiting.get(reply.id);
    if (waiting === undefined) return;
    this.#waiting.delete(reply.id);
    if (reply.ok) waiting.resolve(reply.value);
    else
      waiting.reject(
        reply.code === null ? new Error(reply.message) : new ForebayError(reply.code, reply.message),
      );
  }

  #ended(worker: Worker, cause: Error | undefined): void {
    if (this.#worker !== worker) return;
    this.#worker = null;
    const error = new ForebayError('store.stopped', 'the thread that owns the database ended', { cause });
    for (const waiting of this.#waiting.values()) waiting.reject(error);
    this.#waiting.clear();
    if (!this.#closing) this.#options.onDown?.(error);
  }
}
