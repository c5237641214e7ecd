import { existsSync } from 'node:fs';
import { join } from 'node:path';
import SqliteDatabase from 'better-sqlite3';
import { storeError } from './open-file.ts';
import type { JournalEntry } from './types.ts';

/**
 * The journal of a directory, oldest first, also while an agent runs on it; empty where no agent ever ran.
 *
 * @param sinceT wall time label from which on, ISO 8601; null: all that is kept.
 * @throws ForebayError where the database cannot be read.
 */
export function* readJournal(directory: string, sinceT: string | null): Generator<JournalEntry, void, void> {
  const path = join(directory, 'forebay.db');
  if (!existsSync(path)) return;
  let db: SqliteDatabase.Database | undefined;
  try {
    db = new SqliteDatabase(path, { readonly: true });
    // In pages, so that a long journal neither fills the memory nor holds back the running agent's checkpoints.
    const page = db.prepare<[number, string], JournalEntry>(
      'SELECT n, kind, key, t, json FROM journal WHERE n > ? AND t >= ? ORDER BY n LIMIT 500',
    );
    for (let after = -1; ; ) {
      const entries = page.all(after, sinceT ?? '');
      yield* entries;
      const last = entries.at(-1);
      if (!last) return;
      after = last.n;
    }
  } catch (error) {
    throw storeError(error, path);
  } finally {
    db?.close();
  }
}
