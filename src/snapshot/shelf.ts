/**
 * The folder of snapshots: what is there, and what goes when there is no more room. Bounded in number, bytes and age;
 * snapshots of alarms that nobody has acknowledged go last. Age is run time of the gateway, since its clock may jump.
 */

import { closeSync, mkdirSync, openSync, readdirSync, readSync, rmSync, statSync } from 'node:fs';
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
    return join(this.#folder, `${id}.flac`);
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

  /** A snapshot has been written; others may have to go for it. */
  add(id: string): Shelved {
    const shelved = this.#read(id);
    this.#kept.set(id, shelved);
    this.tidy();
    return shelved;
  }

  /** Removes what is over the bounds. */
  tidy(): void {
    const nowS = this.#host.runS();
    for (const old of this.all) if (nowS - old.tags.takenRunS > this.#limits.ageS) this.#drop(old);
    for (const run of supernumeraryRuns(this.all)) this.#drop(run);
    const going = this.#inOrderOfGoing();
    while (
      this.#kept.size > this.#limits.number ||
      (this.bytes > this.#limits.bytes && this.#kept.size > 0)
    ) {
      this.#drop(going.shift()!);
    }
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
    if (!name.endsWith('.flac')) return;
    const id = name.slice(0, -'.flac'.length);
    try {
      this.#kept.set(id, this.#read(id));
    } catch {
      rmSync(join(this.#folder, name), { force: true });
      this.cleaned++;
    }
  }

  /** From the head of the file alone. */
  #read(id: string): Shelved {
    const path = this.pathOf(id);
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
}

/** Starts and coast-downs beyond the newest three of a machine and the last of each week. */
function supernumeraryRuns(all: readonly Shelved[]): Shelved[] {
  const groups = new Map<string, Shelved[]>();
  for (const shelved of all) {
    const { kind, machines } = shelved.tags;
    if (kind !== 'start' && kind !== 'coast-down') continue;
    const key = `${kind} ${machines.join(' ')}`;
    groups.set(key, [...(groups.get(key) ?? []), shelved]);
  }
  return [...groups.values()].flatMap((runs) => {
    const week = ({ tags }: Shelved) => Math.floor(tags.takenRunS / WEEK_S);
    const lastOfWeek = (run: Shelved, index: number) =>
      runs[index + 1] === undefined || week(runs[index + 1]!) !== week(run);
    return runs.filter((run, index) => index < runs.length - NEWEST_RUNS && !lastOfWeek(run, index));
  });
}
