/**
 * The database as the agent lives with it: trouble is told once and cleared when it is over, a worker that ended is
 * started again. A database that turns out broken is beyond that: only a new start sets it aside and begins afresh.
 */

import { ForebayError } from '../config/errors.ts';
import type { OpenReport, Store } from '../store/types.ts';
import type { Log } from './log.ts';

export type StorageState = 'ok' | 'failing';

export interface StoreWatchHost {
  store: Pick<Store, 'open'>;
  log: Log;
  monotonicS(): number;
  /** The disk is in trouble, or no longer. */
  disk(trouble: string | null): void;
  /** For ten seconds nothing could be written, so nothing leaves either; or that is over. */
  storage(says: StorageState): void;
  /** The agent cannot go on with this database. */
  fatal(error: Error): void;
}

const REOPEN_MS = 1000;
/** Trouble that lasts so long is no hiccup. */
const FAILING_MS = 10_000;

export class StoreWatch {
  readonly #host: StoreWatchHost;
  #openedS = 0;
  #runSAtOpen = 0;
  #trouble = false;
  #says: StorageState = 'ok';
  #failing: NodeJS.Timeout | null = null;
  #givenUp = false;

  constructor(host: StoreWatchHost) {
    this.#host = host;
  }

  /** Run time, as the store counts it, in seconds. */
  get runS(): number {
    return this.#runSAtOpen + this.#host.monotonicS() - this.#openedS;
  }

  get says(): StorageState {
    return this.#says;
  }

  /** @param leastRunS run time that what lies beside the database has seen. */
  async open(leastRunS: number): Promise<OpenReport> {
    const report = await this.#host.store.open(leastRunS);
    this.#runSAtOpen = report.runS;
    this.#openedS = this.#host.monotonicS();
    return report;
  }

  failed(error: unknown): void {
    this.#host.log.warn('the database did not take a commit', { err: error });
    if (error instanceof ForebayError && error.code === 'store.broken') this.#giveUp(error);
    if (this.#trouble) return;
    this.#trouble = true;
    this.#failing = setTimeout(() => this.#say('failing'), FAILING_MS).unref();
    this.#host.disk(error instanceof Error ? error.message : String(error));
  }

  works(): void {
    if (!this.#trouble) return;
    this.#trouble = false;
    if (this.#failing) clearTimeout(this.#failing);
    this.#say('ok');
    this.#host.disk(null);
  }

  /** The worker ended: what was under way failed and is tried again by whoever asked. */
  async reopen(error: Error): Promise<void> {
    this.#host.log.error('the store worker ended', error);
    while (!this.#givenUp) {
      try {
        const { setAside } = await this.open(this.runS);
        // A fresh database knows nothing of the alarms that stand, so neither may the agent.
        if (setAside) this.#giveUp(new ForebayError('store.broken', setAside.reason));
        return;
      } catch (again) {
        this.failed(again);
        await new Promise((resolve) => setTimeout(resolve, REOPEN_MS));
      }
    }
  }

  #say(says: StorageState): void {
    if (says === this.#says) return;
    this.#says = says;
    this.#host.storage(says);
  }

  #giveUp(error: Error): void {
    if (this.#givenUp) return;
    this.#givenUp = true;
    this.#host.fatal(error);
  }
}
