/**
 * The folder of snapshots: what is there, and what goes when there is no more room. Bounded in number, bytes and age;
 * snapshots of alarms that nobody has acknowledged go last. Age is run time of the gateway, since its clock may jump.
 */

import { closeSync, existsSync, mkdirSync, openSync, readdirSync, readSync, rmSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { readFlacHead } from './flac-head.ts';
import { WRITING } from './flac-write.ts';
import { type SnapshotTags, tagsOf } from './tags.ts';

export interface ShelfLimits {
  number: number;
  bytes: number;
  ageS: number;
}

export interface Shelved {
  id: string;
  path: string;
  bytes: number;
  /** Samples per channel. */
  frames: number;
  tags: SnapshotTags;
}

export interface ShelfHost {
  runS(): number;
  /** An alarm that nobody has acknowledged refers to it. */
  needed(id: string): boolean;
}

const EXTENSION = '.flac';
const HEAD_BYTES = 65_536;
const WEEK_S = 7 * 86_400;
/** Of the starts of a machine, and of its coast-downs, so many of the newest are kept, and the last of each week. */
const NEWEST_RUNS = 3;

export class Shelf {
  /** Given up to make room. */
  dropped = 0;
  /** Files that were no whole snapshot, found and removed at the start. */
  cleaned = 0;
  readonly #folder: string;
  readonly #limits: ShelfLimits;
  readonly #host: ShelfHost;
  readonly #kept = new Map<string, Shelved>();

  /** Reads what is there and removes what was only half written. */
  constructor(folder: string, limits: ShelfLimits, host: ShelfHost) {
    this.#folder = folder;
    this.#limits = limits;
    this.#host = host;
    mkdirSync(folder, { recursive: true });
    for (const name of readdirSync(folder)) this.#find(name);
  }

  pathOf(id: string): string {
    return pathIn(this.#folder, id);
  }

  /** Oldest first. */
  get all(): readonly Shelved[] {
    return [...this.#kept.values()].sort((a, b) => a.tags.takenRunS - b.tags.takenRunS);
  }

  get bytes(): number {
    return this.all.reduce((sum, { bytes }) => sum + bytes, 0);
  }

  get(id: string): Shelved | null {
    return this.#kept.get(id) ?? null;
  }

  /**
   * A snapshot has been written; others may have to go for it.
   * @throws where it cannot be read back, or is more than all may take together: then none goes but it.
   */
  add(id: string): Shelved {
    try {
      const shelved = readShelved(this.#folder, id);
      const { bytes } = this.#limits;
      if (shelved.bytes > bytes)
        throw new RangeError(
          `it takes ${megabytes(shelved.bytes)}, all together may take ${megabytes(bytes)}`,
        );
      this.#kept.set(id, shelved);
      this.tidy(id);
      return shelved;
    } catch (error) {
      this.#kept.delete(id);
      rmSync(this.pathOf(id), { force: true });
      throw error;
    }
  }

  /** Removes what is over the bounds. @param added the one that the others make room for. */
  tidy(added: string | null = null): void {
    const nowS = this.#host.runS();
    for (const old of this.all) if (nowS - old.tags.takenRunS > this.#limits.ageS) this.#drop(old);
    for (const run of supernumeraryRuns(this.#plainRuns())) if (run.id !== added) this.#drop(run);
    for (const next of this.#inOrderOfGoing()) {
      if (this.#kept.size <= this.#limits.number && this.bytes <= this.#limits.bytes) return;
      if (next.id !== added) this.#drop(next);
    }
  }

  /** Starts and coast-downs that nobody waits for. */
  #plainRuns(): Shelved[] {
    return this.all.filter(
      ({ id, tags: { kind } }) => (kind === 'start' || kind === 'coast-down') && !this.#host.needed(id),
    );
  }

  #inOrderOfGoing(): Shelved[] {
    const needed = ({ id }: Shelved) => Number(this.#host.needed(id));
    return this.all.toSorted((a, b) => needed(a) - needed(b) || a.tags.takenRunS - b.tags.takenRunS);
  }

  #drop({ id, path }: Shelved): void {
    rmSync(path, { force: true });
    this.#kept.delete(id);
    this.dropped++;
  }

  #find(name: string): void {
    if (name.startsWith(WRITING)) {
      rmSync(join(this.#folder, name), { force: true });
      this.cleaned++;
      return;
    }
    const id = idOf(name);
    if (id === null) return;
    try {
      this.#kept.set(id, readShelved(this.#folder, id));
    } catch (error) {
      // What the disk would not give may be whole all the same.
      if ('syscall' in (error as object)) return;
      rmSync(join(this.#folder, name), { force: true });
      this.cleaned++;
    }
  }
}

/**
 * Run time of the newest snapshot in a folder, in seconds; 0: there is none. Changes nothing, so that it may be asked
 * before the folder is this agent's.
 */
export function newestRunS(folder: string): number {
  const names = existsSync(folder) ? readdirSync(folder) : [];
  const times = names.map((name) => {
    const id = name.startsWith(WRITING) ? null : idOf(name);
    try {
      return id === null ? 0 : readShelved(folder, id).tags.takenRunS;
    } catch {
      return 0;
    }
  });
  return Math.max(0, ...times);
}

function pathIn(folder: string, id: string): string {
  return join(folder, `${id}${EXTENSION}`);
}

/** null: no file of a snapshot is called so. */
function idOf(name: string): string | null {
  return name.endsWith(EXTENSION) ? name.slice(0, -EXTENSION.length) : null;
}

/** From the head of the file alone. */
function readShelved(folder: string, id: string): Shelved {
  const path = pathIn(folder, id);
  const fd = openSync(path, 'r');
  try {
    const head = Buffer.alloc(HEAD_BYTES);
    const length = readSync(fd, head, 0, HEAD_BYTES, 0);
    const { format, comments } = readFlacHead(head.subarray(0, length), (what) => {
      throw new RangeError(`${path} ${what}`);
    });
    const tags = tagsOf(comments, format.channels);
    if (tags === null || tags.id !== id) throw new RangeError(`${path} is not the snapshot of its name`);
    return { id, path, bytes: statSync(path).size, frames: format.frames, tags };
  } finally {
    closeSync(fd);
  }
}

function megabytes(bytes: number): string {
  return `${(bytes / 1e6).toPrecision(3)} MB`;
}

/** Those beyond the newest three of a machine, on each of its nodes, and the last of each week. */
function supernumeraryRuns(all: readonly Shelved[]): Shelved[] {
  const groups = new Map<string, Shelved[]>();
  for (const run of all) {
    const { kind, machines, link, cause } = run.tags;
    // A node may serve several machines: the cause names the one that started.
    const key = [kind, ...machines, link, cause].join(' ');
    groups.set(key, [...(groups.get(key) ?? []), run]);
  }
  return [...groups.values()].flatMap((runs) => {
    const week = ({ tags }: Shelved) => Math.floor(tags.takenRunS / WEEK_S);
    const lastOfWeek = (run: Shelved, index: number) =>
      runs[index + 1] === undefined || week(runs[index + 1]!) !== week(run);
    return runs.filter((run, index) => index < runs.length - NEWEST_RUNS && !lastOfWeek(run, index));
  });
}
