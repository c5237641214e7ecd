/** What the station answers to asks about waveforms: take one, list them, send one in parts. */

import { createHash } from 'node:crypto';
import { createReadStream, mkdirSync, rmSync, statSync } from 'node:fs';
import { type FileHandle, open } from 'node:fs/promises';
import { dirname, join } from 'node:path';
import type { Station } from '../config/station.ts';
import type { Shelved } from '../snapshot/shelf.ts';
import { AskRefused } from '../uplink/asks.ts';
import type { Ask } from '../uplink/payload-schemas.ts';
import type { Uplink } from '../uplink/uplink.ts';
import type { SnapshotKeeper } from './snapshot-keeper.ts';

export type SnapshotUplink = Pick<
  Uplink,
  'handle' | 'answer' | 'sendParts' | 'cancelParts' | 'waveformBudget' | 'status'
>;

export interface SnapshotAskSources {
  keeper: Pick<SnapshotKeeper, 'shelf' | 'flac' | 'isMaking' | 'take'>;
  station(): Station;
  wallMs(): number;
}

/** Small enough that an alarm behind one waits less than two seconds at 5 kB/s. */
const PART_BYTES = 8192;
/** What a broker of MQTT 3.1.1 is sent for one ask: it cannot say that nobody listens. */
const PARTS_UNHEARD = 64;
const USUAL_SECONDS = 10;
/** A ring holds this much in any case. */
const MOST_SECONDS = 15;
/** Cuts kept for whoever asks again for parts of them. */
const MAX_CUTS = 8;
const MAX_ANSWER_BYTES = 48_000;

interface Source {
  path: string;
  bytes: number;
  sha256: string;
}

export class SnapshotAsks {
  readonly #sources: SnapshotAskSources;
  readonly #cutFolder: string;
  readonly #cuts = new Map<string, Promise<string>>();
  readonly #hashes = new Map<string, Promise<Source>>();
  #cutsMade = 0;

  constructor(sources: SnapshotAskSources) {
    this.#sources = sources;
    this.#cutFolder = join(dirname(sources.keeper.shelf.pathOf('any')), 'cuts');
    rmSync(this.#cutFolder, { recursive: true, force: true });
  }

  answer(uplink: SnapshotUplink): void {
    uplink.handle('snapshot', (ask) => this.#take(ask));
    uplink.handle('snapshots', () => this.#list());
    uplink.handle('fetch', (ask) => this.#fetch(uplink, ask));
  }

  async #take({
    point,
    machine,
    seconds = USUAL_SECONDS,
  }: Ask<'snapshot'>): Promise<Record<string, unknown>> {
    if (seconds > MOST_SECONDS) throw new AskRefused(`a snapshot taken now may be ${MOST_SECONDS} s long`);
    const links = this.#linksOf(point, machine);
    const taken: Shelved[] = [];
    const missing: string[] = [];
    for (const link of links) {
      try {
        taken.push(await this.#sources.keeper.take(link, seconds, `asked for ${point ?? machine}`));
      } catch (error) {
        if (!(error instanceof RangeError)) throw error;
        missing.push(error.message);
      }
    }
    if (taken.length === 0) throw new AskRefused(missing.join('; '));
    return { snapshot: taken[0]?.id, snapshots: taken.map(lineOf), missing };
  }

  #linksOf(pointKey: string | undefined, machineId: string | undefined): string[] {
    const { machines } = this.#sources.station();
    if (machineId !== undefined) {
      const machine = machines.find(({ id }) => id === machineId);
      if (!machine) throw new AskRefused(`there is no machine ${machineId}`);
      return [...new Set(machine.points.map(({ link }) => link))];
    }
    const point = machines.flatMap(({ points }) => points).find(({ key }) => key === pointKey);
    if (!point) throw new AskRefused(`there is no point ${pointKey}`);
    return [point.link];
  }

  /** The newest as they fit; `more` says that there are older ones. */
  #list(): Record<string, unknown> {
    const lines: Record<string, unknown>[] = [];
    const all = this.#sources.keeper.shelf.all.toReversed();
    let bytes = 0;
    for (const shelved of all) {
      const line = lineOf(shelved);
      bytes += JSON.stringify(line).length;
      if (bytes > MAX_ANSWER_BYTES) break;
      lines.push(line);
    }
    return { snapshots: lines, more: lines.length < all.length };
  }

  async #fetch(uplink: SnapshotUplink, ask: Ask<'fetch'>): Promise<Record<string, unknown>> {
    if (ask.cancel !== undefined) uplink.cancelParts(ask.cancel);
    const shelved = this.#shelved(ask.snapshot);
    const { path, bytes, sha256 } = await this.#source(await this.#pathFor(shelved, ask));
    const parts = Math.ceil(bytes / PART_BYTES);
    const wanted = [...new Set(ask.parts ?? Array.from({ length: parts }, (_, part) => part))];
    const beyond = wanted.find((part) => part >= parts);
    if (beyond !== undefined) throw new AskRefused(`there is no part ${beyond}: there are ${parts}, from 0`);
    const sending = uplink.status().protocol === '5' ? wanted : wanted.slice(0, PARTS_UNHEARD);
    const about = {
      snapshot: shelved.id,
      bytes,
      sha256,
      part_bytes: PART_BYTES,
      parts,
      sending: sending.length,
    };
    if (sending.length === 0) return about;
    const { leftBytes, renewsInS } = uplink.waveformBudget();
    const renewed = new Date(this.#sources.wallMs() + renewsInS * 1000).toISOString();
    const spent = `the daily budget for waveforms is spent until ${renewed}`;
    if (leftBytes <= 0) throw new AskRefused(spent);
    // Held open, so that a transfer of hours outlives its file, whatever makes room meanwhile.
    const file = await open(path, 'r').catch(removed);
    const begun = uplink.sendParts({
      askId: ask.id,
      parts: sending,
      read: (part) => readPart(file, part),
      ended: (trouble) => {
        void file.close();
        if (trouble === null || trouble.kind === 'cancelled' || trouble.kind === 'nobody-listens') return;
        const error =
          trouble.kind === 'budget' ? spent : `the waveform could not be sent on: ${trouble.reason}`;
        void uplink.answer(ask.id, { ask: ask.id, ok: false, error }).catch(() => undefined);
      },
    });
    if (begun) return about;
    await file.close();
    throw new AskRefused('too many waveforms are being sent: try again in a minute');
  }

  #shelved(id: string): Shelved {
    const { keeper } = this.#sources;
    const shelved = keeper.shelf.get(id);
    if (shelved) return shelved;
    if (keeper.isMaking(id))
      throw new AskRefused(`snapshot ${id} is not complete yet: try again in some seconds`);
    throw new AskRefused(`there is no snapshot ${id}: ask/snapshots lists those there are`);
  }

  /** The snapshot itself, or the cut of it that is asked for. */
  async #pathFor(shelved: Shelved, { channels, from_s: fromS, seconds }: Ask<'fetch'>): Promise<string> {
    if (channels === undefined && fromS === undefined && seconds === undefined) return shelved.path;
    const key = JSON.stringify([shelved.id, channels?.toSorted() ?? null, fromS ?? 0, seconds ?? null]);
    const made = this.#cuts.get(key) ?? this.#makeCut(shelved, channels ?? null, fromS ?? 0, seconds ?? null);
    this.#cuts.delete(key);
    this.#cuts.set(key, made);
    for (const [oldest, path] of this.#cuts) {
      if (this.#cuts.size <= MAX_CUTS) break;
      this.#cuts.delete(oldest);
      void path.then((gone) => rmSync(gone, { force: true })).catch(() => undefined);
    }
    try {
      return await made;
    } catch (error) {
      this.#cuts.delete(key);
      throw new AskRefused(`that cut of ${shelved.id} cannot be made: ${(error as Error).message}`);
    }
  }

  async #makeCut(
    shelved: Shelved,
    channels: readonly string[] | null,
    fromS: number,
    seconds: number | null,
  ): Promise<string> {
    mkdirSync(this.#cutFolder, { recursive: true });
    const path = join(this.#cutFolder, `${this.#cutsMade++}.flac`);
    await this.#sources.keeper.flac.run({ kind: 'cut', from: shelved.path, path, channels, fromS, seconds });
    return path;
  }

  async #source(path: string): Promise<Source> {
    const known = this.#hashes.get(path) ?? hashed(path);
    this.#hashes.set(path, known);
    for (const oldest of this.#hashes.keys()) {
      if (this.#hashes.size <= 2 * MAX_CUTS) break;
      this.#hashes.delete(oldest);
    }
    try {
      return await known;
    } catch {
      this.#hashes.delete(path);
      return removed();
    }
  }
}

function removed(): never {
  throw new AskRefused('the snapshot has been removed from the disk');
}

function lineOf({ id, bytes, frames, tags }: Shelved): Record<string, unknown> {
  return {
    snapshot: id,
    t: tags.start,
    seconds: Number((frames / tags.rate.hz).toPrecision(4)),
    bytes,
    machines: tags.machines,
    link: tags.link,
    channels: tags.channels.map(({ name }) => name),
    kind: tags.kind,
    cause: tags.cause,
    alarms: tags.alarms,
  };
}

async function hashed(path: string): Promise<Source> {
  const hash = createHash('sha256');
  for await (const chunk of createReadStream(path)) hash.update(chunk as Buffer);
  return { path, bytes: statSync(path).size, sha256: hash.digest('hex') };
}

async function readPart(file: FileHandle, part: number): Promise<Buffer> {
  const buffer = Buffer.alloc(PART_BYTES);
  const { bytesRead } = await file.read(buffer, 0, PART_BYTES, part * PART_BYTES);
  return buffer.subarray(0, bytesRead);
}
