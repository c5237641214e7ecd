/** The FLAC worker as seen from the main thread: one job at a time, in a thread made for it. */

import { Worker } from 'node:worker_threads';
import type { FlacJob, FlacOutcome } from './flac-job.ts';

/** Jobs that may wait; beyond, a new one is refused. Their samples are held in memory. */
const MAX_WAITING = 8;

export class FlacRoom {
  readonly #workerUrl: URL;
  #last: Promise<unknown> = Promise.resolve();
  #waiting = 0;

  /** @param workerUrl left out, the built worker beside this file. */
  constructor(workerUrl = new URL('./flac-worker.js', import.meta.url)) {
    this.#workerUrl = workerUrl;
  }

  /** Rejects with what went wrong, in words. */
  run(job: FlacJob): Promise<void> {
    if (this.#waiting >= MAX_WAITING)
      return Promise.reject(new Error('too many snapshots are being written'));
    this.#waiting++;
    const done = this.#last.then(() => this.#work(job)).finally(() => this.#waiting--);
    this.#last = done.catch(() => undefined);
    return done;
  }

  /** Resolves when nothing is under way. */
  async idle(): Promise<void> {
    while (this.#waiting > 0) await this.#last;
  }

  #work(job: FlacJob): Promise<void> {
    const transferList = job.kind === 'write' ? job.counts.map(({ buffer }) => buffer as ArrayBuffer) : [];
    return new Promise((resolve, reject) => {
      const worker = new Worker(this.#workerUrl, { workerData: job, transferList });
      worker.on('message', (outcome: FlacOutcome) =>
        outcome.ok ? resolve() : reject(new Error(outcome.error)),
      );
      worker.on('error', reject);
      worker.on('exit', (code) => reject(new Error(`the FLAC worker ended with ${code}`)));
    });
  }
}
