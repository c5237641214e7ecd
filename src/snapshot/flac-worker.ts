/** Does one job and ends: encoding is seldom wanted, and a thread that waits for it holds memory. */

import { parentPort, workerData } from 'node:worker_threads';
import type { FlacJob, FlacOutcome } from './flac-job.ts';
import { writeCut, writeSnapshot } from './flac-write.ts';

const job = workerData as FlacJob;

async function outcome(): Promise<FlacOutcome> {
  try {
    await (job.kind === 'write' ? writeSnapshot(job) : writeCut(job));
    return { ok: true };
  } catch (error) {
    return { ok: false, error: error instanceof Error ? error.message : String(error) };
  }
}

parentPort?.postMessage(await outcome());
