/**
 * Which snapshot each alarm last referred to, kept across restarts in a small file beside the snapshots. It is written
 * whole under another name and put in place; where it cannot be read, alarms begin without.
 */

import { readFileSync, renameSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';

export class SnapshotIndex {
  readonly #path: string;
  #byAlarm: Map<string, string>;

  constructor(folder: string) {
    this.#path = join(folder, 'alarms.json');
    this.#byAlarm = new Map(Object.entries(readIndex(this.#path)));
  }

  get(alarm: string): string | null {
    return this.#byAlarm.get(alarm) ?? null;
  }

  alarmsOf(id: string): string[] {
    return [...this.#byAlarm].filter(([, snapshot]) => snapshot === id).map(([alarm]) => alarm);
  }

  /** Forgets what `isThere` no longer knows. @throws where the file cannot be written; in memory it holds all the same. */
  set(alarm: string, id: string, isThere: (id: string) => boolean): void {
    if (this.#byAlarm.get(alarm) === id) return;
    this.#byAlarm.set(alarm, id);
    this.#byAlarm = new Map(
      [...this.#byAlarm].filter(([, snapshot]) => snapshot === id || isThere(snapshot)),
    );
    this.#write();
  }

  /** @throws where the file cannot be written; in memory it holds all the same. */
  forget(alarm: string): void {
    if (this.#byAlarm.delete(alarm)) this.#write();
  }

  #write(): void {
    writeFileSync(`${this.#path}.new`, JSON.stringify(Object.fromEntries(this.#byAlarm)));
    renameSync(`${this.#path}.new`, this.#path);
  }
}

function readIndex(path: string): Record<string, string> {
  try {
    const value: unknown = JSON.parse(readFileSync(path, 'utf8'));
    const entries = Object.entries(value as object).filter(([, id]) => typeof id === 'string');
    return Object.fromEntries(entries);
  } catch {
    return {};
  }
}
