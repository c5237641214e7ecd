/**
 * The thread that owns SQLite. Writes that arrive together share one transaction, and with it one flush to the disk:
 * urgent ones run as soon as the messages already waiting have been read, the rest wait at most half a second. A read
 * first writes what came before it. Each request gets its own answer: when the shared transaction fails, its
 * parts are tried one by one.
 */

import { parentPort, workerData } from 'node:worker_threads';
import { ForebayError } from '../config/errors.ts';
import { Database } from './database.ts';
import { type Reply, type Request, run, type StoreSettings, urgent } from './requests.ts';
import type { Commit } from './types.ts';

const longestWaitMs = 500;

const port = parentPort!;
const database = new Database(workerData as StoreSettings);
let waiting: Request[] = [];
let patient: NodeJS.Timeout | null = null;
let soon: NodeJS.Immediate | null = null;

port.on('message', (request: Request) => {
  switch (request.op) {
    case 'commit':
      waiting.push(request);
      if (urgent(request.args[0] as Commit)) soon ??= setImmediate(flush);
      else patient ??= setTimeout(flush, longestWaitMs);
      return;
    case 'accept':
    case 'reject':
      waiting.push(request);
      soon ??= setImmediate(flush);
      return;
    default:
      flush();
      answer(request);
      if (request.op === 'close') port.close();
  }
});

function flush(): void {
  if (patient !== null) clearTimeout(patient);
  if (soon !== null) clearImmediate(soon);
  patient = null;
  soon = null;
  const requests = waiting;
  waiting = [];
  if (requests.length === 0) return;
  try {
    database.together(() => {
      for (const request of requests) run(database, request);
    });
  } catch (error) {
    const only = requests.length === 1 ? requests[0] : undefined;
    if (only !== undefined) refuse(only, error);
    else for (const request of requests) answer(request);
    return;
  }
  for (const request of requests) send({ id: request.id, ok: true, value: undefined });
}

function answer(request: Request): void {
  try {
    send({ id: request.id, ok: true, value: run(database, request) });
  } catch (error) {
    refuse(request, error);
  }
}

function refuse(request: Request, error: unknown): void {
  const message = error instanceof Error ? error.message : String(error);
  send({ id: request.id, ok: false, code: error instanceof ForebayError ? error.code : null, message });
}

function send(reply: Reply): void {
  port.postMessage(reply);
}
