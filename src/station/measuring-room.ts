/**
 * The measuring worker as seen from the main thread: jobs in, readings out, in order. A worker that dies is replaced;
 * the job it was at is given up, so that a record that kills it cannot do so for ever.
 */

import { Worker } from 'node:worker_threads';
import type { MeasureJob, MeasureOutcome, MeasuringSetup, ToWorker } from './measure-job.ts';

/** Jobs that may wait. Beyond, the oldest is given up: what is newest matters most. */
const MAX_WAITING = 256;
const RESTART_AFTER_MS = 500;

export interface MeasuringHost {
  workerLost(reason: string): void;
  /** A worker that was lost has been replaced and measures again. */
  workerBack(): void;
}

interface Waiting {
  job: Omit<MeasureJob, 'id'>;
  resolve(outcome: MeasureOutcome): void;
}

export class MeasuringRoom {
  /** Records that got no reading, by reason. */
  readonly missed: Record<string, number> = {};
  workerRestarts = 0;
  /** Outcomes that the worker gave. */
  settled = 0;
  #setup: MeasuringSetup;
  readonly #host: MeasuringHost;
  readonly #rings = new Map<string, SharedArrayBuffer>();
  readonly #queue: Waiting[] = [];
  #current: (Waiting & { id: number }) | null = null;
  #nextId = 1;
  #worker: Worker | null = null;
  #restart: NodeJS.Timeout | null = null;
  #stopped = false;
  #lostSince = false;

  constructor(setup: MeasuringSetup, host: MeasuringHost) {
    this.#setup = setup;
    this.#host = host;
    this.#start();
  }

  get waiting(): number {
    return this.#queue.length + (this.#current ? 1 : 0);
  }

  /** Makes the ring of a link known; a later one takes the place of an earlier. */
  addRing(link: string, memory: SharedArrayBuffer): void {
    this.#rings.set(link, memory);
    this.#post({ kind: 'ring', link, memory });
  }

  /** A link that is gone: its samples are given back. */
  forgetRing(link: string): void {
    this.#rings.delete(link);
    this.#post({ kind: 'ring', link, memory: null });
  }

  /**
   * Goes on with other points. Jobs that wait are given up where `stillWanted` says no: a point that is measured
   * otherwise from now on, or samples that are no longer there.
   */
  replan(setup: MeasuringSetup, stillWanted: (job: Omit<MeasureJob, 'id'>) => boolean): void {
    this.#setup = setup;
    const waiting = this.#queue.splice(0);
    this.#queue.push(...waiting.filter(({ job }) => stillWanted(job)));
    for (const unwanted of waiting.filter(({ job }) => !stillWanted(job)))
      this.#giveUp(unwanted, 'the configuration changed');
    this.#post({ kind: 'setup', setup });
  }

  /** Always settles: with a reading, or with why there is none. */
  measure(job: Omit<MeasureJob, 'id'>): Promise<MeasureOutcome> {
    return new Promise((resolve) => {
      if (this.#stopped) {
        resolve({ id: 0, missed: 'stopping' });
        return;
      }
      this.#queue.push({ job, resolve });
      if (this.#queue.length > MAX_WAITING) this.#giveUp(this.#queue.shift(), 'measuring is behind');
      this.#next();
    });
  }

  async stop(): Promise<void> {
    this.#stopped = true;
    if (this.#restart) clearTimeout(this.#restart);
    for (const waiting of this.#queue.splice(0)) this.#giveUp(waiting, 'stopping');
    await this.#worker?.terminate();
    if (this.#current) this.#giveUp(this.#current, 'stopping');
    this.#current = null;
  }

  #start(): void {
    const worker = new Worker(new URL('./measuring-worker.js', import.meta.url), { workerData: this.#setup });
    this.#worker = worker;
    worker.on('message', (outcome: MeasureOutcome) => this.#settle(outcome));
    worker.on('error', (error) => this.#lost(worker, error.message));
    worker.on('exit', (code) => this.#lost(worker, `the measuring worker ended with ${code}`));
    for (const [link, memory] of this.#rings) this.#post({ kind: 'ring', link, memory });
    this.#next();
  }

  #lost(worker: Worker, reason: string): void {
    if (this.#stopped || this.#worker !== worker) return;
    this.#worker = null;
    this.workerRestarts++;
    this.#lostSince = true;
    const current = this.#current;
    this.#current = null;
    this.#giveUp(current, 'the measuring worker died');
    this.#host.workerLost(reason);
    this.#restart = setTimeout(() => this.#start(), RESTART_AFTER_MS);
  }

  #next(): void {
    if (this.#current || !this.#worker) return;
    const waiting = this.#queue.shift();
    if (!waiting) return;
    const id = this.#nextId++;
    this.#current = { ...waiting, id };
    this.#post({ kind: 'measure', job: { ...waiting.job, id } });
  }

  #settle(outcome: MeasureOutcome): void {
    const current = this.#current;
    if (!current || current.id !== outcome.id) return;
    this.#current = null;
    this.settled++;
    if (this.#lostSince) {
      this.#lostSince = false;
      this.#host.workerBack();
    }
    if ('missed' in outcome) this.#count(outcome.missed);
    current.resolve(outcome);
    this.#next();
  }

  #giveUp(waiting: Waiting | null | undefined, missed: string): void {
    if (!waiting) return;
    this.#count(missed);
    waiting.resolve({ id: 0, missed });
  }

  #count(missed: string): void {
    this.missed[missed] = (this.missed[missed] ?? 0) + 1;
  }

  #post(message: ToWorker): void {
    this.#worker?.postMessage(message);
  }
}
