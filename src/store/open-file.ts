/**
 * Opens the database file of one agent.
 *
 *   forebay.db, -wal, -shm   the database; set aside together as forebay.db.broken-<k>… when it cannot be used
 *   forebay.lock             an SQLite file whose exclusive lock is held as long as the agent runs; the system
 *                            lets go of it however the process ends, so it is never stale
 *
 * Only what is known to be broken is set aside. A disk that is full, read-only or failing says nothing about the
 * file, so it is an error and the file stays.
 */

import { existsSync, mkdirSync, readdirSync, renameSync, rmSync, statfsSync, statSync } from 'node:fs';
import { join } from 'node:path';
import SqliteDatabase, { type Database } from 'better-sqlite3';
import { ForebayError } from '../config/errors.ts';
import { schemaVersion } from './schema.ts';

const fileName = 'forebay.db';
const suffixes = ['', '-wal', '-shm'] as const;
const brokenKept = 3;
const fullBelowBytes = 1 << 20;

export interface OpenedFile {
  db: Database;
  setAside?: { reason: string; path: string };
}

/** @throws ForebayError where the directory is not there and cannot be made. */
export function makeDirectory(directory: string): void {
  try {
    mkdirSync(directory, { recursive: true });
  } catch (error) {
    throw new ForebayError(
      'store.unwritable',
      `storage.directory ${directory}: ${(error as Error).message}`,
      {
        cause: error,
      },
    );
  }
}

export function lockDirectory(directory: string): Database {
  const path = join(directory, 'forebay.lock');
  let lock: Database | undefined;
  try {
    lock = new SqliteDatabase(path, { timeout: 0 });
    lock.exec('BEGIN EXCLUSIVE');
    return lock;
  } catch (error) {
    lock?.close();
    if (sqliteCode(error).startsWith('SQLITE_BUSY')) {
      throw new ForebayError('store.locked', `another agent is running on ${directory}`, { cause: error });
    }
    throw new ForebayError('store.unwritable', `${path}: ${(error as Error).message}`, { cause: error });
  }
}

/** Opens and checks; sets a broken database aside and starts a fresh one. */
export function openFile(directory: string, maxBytes: number): OpenedFile {
  const path = join(directory, fileName);
  const emptied = existsSync(path) && statSync(path).size === 0;
  const reason = emptied ? 'the file was empty' : wrongWith(path);
  const setAside = reason === null ? undefined : { reason, path: moveAside(directory) };
  const db = new SqliteDatabase(path);
  try {
    configure(db, maxBytes);
  } catch (error) {
    db.close();
    throw storeError(error, path);
  }
  return setAside === undefined ? { db } : { db, setAside };
}

/** null: nothing, or there is no database yet. Throws for troubles that are not the file's. */
function wrongWith(path: string): string | null {
  if (!existsSync(path)) return null;
  let db: Database | undefined;
  let newer: number | null = null;
  try {
    db = new SqliteDatabase(path);
    const verdict = db.pragma('quick_check(1)', { simple: true });
    if (verdict !== 'ok') return `the check of the database says: ${String(verdict)}`;
    const version = db.pragma('user_version', { simple: true }) as number;
    if (version > schemaVersion) newer = version;
    else if (version > 0 && db.prepare("SELECT value FROM meta WHERE key = 'store'").get() === undefined) {
      return 'the database has lost its identity';
    }
  } catch (error) {
    if (isBroken(error)) return (error as Error).message;
    throw storeError(error, path);
  } finally {
    db?.close();
  }
  if (newer !== null) {
    throw new ForebayError('store.newer', `${path} has layout ${newer}, this agent knows ${schemaVersion}`);
  }
  return null;
}

function configure(db: Database, maxBytes: number): void {
  // Before the first table: later it would need a VACUUM.
  db.pragma('auto_vacuum = INCREMENTAL');
  db.pragma('journal_mode = WAL');
  // better-sqlite3 reopens a WAL with NORMAL, which may lose commits when the power fails.
  db.pragma('synchronous = FULL');
  db.pragma('temp_store = MEMORY');
  db.pragma('journal_size_limit = 4194304');
  db.pragma('trusted_schema = OFF');
  const pageBytes = db.pragma('page_size', { simple: true }) as number;
  db.pragma(`max_page_count = ${Math.max(64, Math.floor(maxBytes / pageBytes))}`);
}

function moveAside(directory: string): string {
  const numbers = readdirSync(directory)
    .map((name) => /^forebay\.db\.broken-(\d+)$/.exec(name)?.[1])
    .filter((digits) => digits !== undefined)
    .map(Number)
    .sort((a, b) => a - b);
  for (const old of numbers.slice(0, Math.max(0, numbers.length - brokenKept + 1))) {
    for (const suffix of suffixes)
      rmSync(join(directory, `${fileName}.broken-${old}${suffix}`), { force: true });
  }
  const target = join(directory, `${fileName}.broken-${(numbers.at(-1) ?? 0) + 1}`);
  for (const suffix of suffixes) {
    const from = join(directory, fileName + suffix);
    if (existsSync(from)) renameSync(from, target + suffix);
  }
  return target;
}

function sqliteCode(error: unknown): string {
  const code = (error as { code?: unknown } | null)?.code;
  return typeof code === 'string' ? code : '';
}

function isBroken(error: unknown): boolean {
  const code = sqliteCode(error);
  if (code.startsWith('SQLITE_CORRUPT') || code === 'SQLITE_NOTADB') return true;
  // "no such table": a database that is not ours, or one that lost its schema.
  return code === 'SQLITE_ERROR' && /no such (table|column)/.test((error as Error).message);
}

/** Whether next to nothing is free: a write that fails on a disk with room fails for another reason, as a worn card. */
function isFull(path: string): boolean {
  try {
    const { bavail, bsize } = statfsSync(path);
    return bavail * bsize < fullBelowBytes;
  } catch {
    return false;
  }
}

/** Tells troubles of the disk, of the file and of the program apart. */
export function storeError(error: unknown, where: string): unknown {
  if (error instanceof ForebayError) return error;
  const code = sqliteCode(error);
  if (code === '') return error;
  const message = `${where}: ${(error as Error).message} (${code})`;
  const cause = { cause: error };
  if (code === 'SQLITE_FULL' || (code === 'SQLITE_IOERR_WRITE' && isFull(where)))
    return new ForebayError('store.full', message, cause);
  if (isBroken(error)) return new ForebayError('store.broken', message, cause);
  if (/^SQLITE_(READONLY|CANTOPEN|IOERR|PERM|AUTH|NOLFS)/.test(code)) {
    return new ForebayError('store.unwritable', message, cause);
  }
  return error;
}
