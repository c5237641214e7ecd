import { existsSync, mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { storeLimits } from '../../src/store/limits.ts';
import { messageClasses, type OutboxMessage, type StoreLimits } from '../../src/store/types.ts';

/** The worker as it ships; the test command builds it first. */
export const storeWorkerUrl = new URL('../../dist/store/store-worker.js', import.meta.url);

export const roomyLimits: StoreLimits = storeLimits(512);

const folders: string[] = [];

/** Memory where there is such a disk: what is tested survives a killed process, not a power cut. */
const base = existsSync('/dev/shm') ? '/dev/shm' : tmpdir();

export function makeFolder(): string {
  const folder = mkdtempSync(join(base, 'forebay-store-'));
  folders.push(folder);
  return folder;
}

export function removeFolders(): void {
  for (const folder of folders.splice(0)) rmSync(folder, { recursive: true, force: true });
}

export function message(
  n: number,
  changes: Partial<Omit<OutboxMessage, 'payload'>> & { text?: string } = {},
): OutboxMessage {
  const { text, ...rest } = changes;
  return {
    n,
    class: 'alarm',
    topic: `forebay/north-weir/pump-1/alarm/p.${n}`,
    payload: Buffer.from(text ?? `{"id":"x-${n}"}`),
    qos: 1,
    retain: false,
    ...rest,
  };
}

export const every = { max: 1000, busyTopics: [], classes: messageClasses };
