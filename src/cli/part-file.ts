/**
 * A file that arrives in parts: bytes in `FILE.part`, what is there already in `FILE.part.json`, so that a pull that
 * was broken off goes on where it was. The file gets its name when all of it is there and its hash is right.
 */

import { createHash } from 'node:crypto';
import {
  closeSync,
  createReadStream,
  existsSync,
  fsyncSync,
  openSync,
  readFileSync,
  renameSync,
  rmSync,
  writeFileSync,
  writeSync,
} from 'node:fs';
import { ForebayError } from '../config/errors.ts';

/** What is being fetched, as the station says. */
export interface WholeFile {
  snapshot: string;
  bytes: number;
  sha256: string;
  partBytes: number;
  parts: number;
}

interface Saved extends WholeFile {
  have: number[];
}

export class PartFile {
  readonly whole: WholeFile;
  readonly #path: string;
  readonly #have: Set<number>;
  readonly #fd: number;

  /** Goes on with what is there if it is of the same file, else begins anew. */
  constructor(path: string, whole: WholeFile) {
    this.#path = path;
    this.whole = whole;
    const saved = savedOf(path);
    const same = saved !== null && saved.sha256 === whole.sha256 && saved.partBytes === whole.partBytes;
    const possible = (part: number) => Number.isInteger(part) && part >= 0 && part < whole.parts;
    this.#have = new Set(same ? saved.have.filter(possible) : []);
    try {
      this.#fd = openSync(`${path}.part`, same ? 'r+' : 'w+');
    } catch (error) {
      throw new ForebayError('file.unwritable', `${path}.part: ${(error as Error).message}`, {
        cause: error,
      });
    }
  }

  get missing(): number[] {
    return Array.from({ length: this.whole.parts }, (_, part) => part).filter(
      (part) => !this.#have.has(part),
    );
  }

  has(part: number): boolean {
    return this.#have.has(part);
  }

  get bytesHere(): number {
    const { parts, partBytes, bytes } = this.whole;
    const last = parts - 1;
    return [...this.#have].reduce(
      (sum, part) => sum + (part === last ? bytes - last * partBytes : partBytes),
      0,
    );
  }

  /** Whether it is new and fits; others are dropped. */
  put(part: number, bytes: Uint8Array): boolean {
    const { parts, partBytes, bytes: all } = this.whole;
    if (!(part >= 0 && part < parts) || this.#have.has(part)) return false;
    if (bytes.length !== Math.min(partBytes, all - part * partBytes)) return false;
    writeSync(this.#fd, bytes, 0, bytes.length, part * partBytes);
    this.#have.add(part);
    return true;
  }

  /** What is there will be found again. */
  save(): void {
    fsyncSync(this.#fd);
    const saved: Saved = { ...this.whole, have: [...this.#have].sort((a, b) => a - b) };
    writeFileSync(`${this.#path}.part.json.new`, JSON.stringify(saved));
    renameSync(`${this.#path}.part.json.new`, `${this.#path}.part.json`);
  }

  close(): void {
    closeSync(this.#fd);
  }

  /** Verifies and gives the file its name. @throws ForebayError where the hash is another: nothing of it is kept. */
  async finish(): Promise<void> {
    fsyncSync(this.#fd);
    this.close();
    const hash = createHash('sha256');
    for await (const chunk of createReadStream(`${this.#path}.part`)) hash.update(chunk as Buffer);
    rmSync(`${this.#path}.part.json`, { force: true });
    if (hash.digest('hex') !== this.whole.sha256) {
      rmSync(`${this.#path}.part`, { force: true });
      throw new ForebayError(
        'pull.damaged',
        `${this.#path} arrived damaged: its hash is not what the station says`,
      );
    }
    renameSync(`${this.#path}.part`, this.#path);
  }
}

/** Which snapshot a pull that was broken off was after; null: none. */
export function savedOf(path: string): Saved | null {
  try {
    if (!existsSync(`${path}.part`)) return null;
    const saved = JSON.parse(readFileSync(`${path}.part.json`, 'utf8')) as Partial<Saved>;
    const { snapshot, bytes, sha256, partBytes, parts, have } = saved;
    if (snapshot === undefined || sha256 === undefined || !Array.isArray(have)) return null;
    return { snapshot, bytes: bytes ?? 0, sha256, partBytes: partBytes ?? 0, parts: parts ?? 0, have };
  } catch {
    return null;
  }
}
