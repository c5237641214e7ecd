/**
 * Keeps the waveforms that prove something. The first reading over a limit freezes the ring around its record; when
 * the alarm comes of it the stretch becomes a snapshot, else it is dropped. Starts and coast-downs are kept as well,
 * and what somebody asks for. A second alarm within a stretch refers to it, or makes it longer; nothing is kept twice.
 *
 * An alarm names its snapshot when it is published, so the name is given at the freezing; to name it is to keep it.
 */

import { randomBytes } from 'node:crypto';
import { join } from 'node:path';
import type { AlarmEffect } from '../alarm/effects.ts';
import type { Machine, Point, Station } from '../config/station.ts';
import { planPoint } from '../measure/plan.ts';
import type { Reading } from '../measure/reading.ts';
import type { Capture } from '../snapshot/capture.ts';
import { FlacRoom } from '../snapshot/flac-room.ts';
import { Shelf, type Shelved } from '../snapshot/shelf.ts';
import type { ShaftTag, SnapshotKind, SnapshotTags } from '../snapshot/tags.ts';
import { SnapshotIndex } from './snapshot-index.ts';
import { holds, type LinkSource, Making, type Stretch } from './snapshot-making.ts';

export interface KeeperHost {
  station(): Station;
  /** null: the link has had no samples. */
  source(link: string): LinkSource | null;
  wallMs(): number;
  monotonicS(): number;
  /** Run time of the gateway over all starts, in seconds. */
  runS(): number;
  clock(): 'synchronised' | 'free';
  unacknowledged(alarm: string): boolean;
  /** null: unknown. */
  running(machine: string): boolean | null;
  log(message: string, details: Record<string, unknown>): void;
}

/** A machine runs up within seconds, and the reading that shows it ends a record later. */
const RUN_BEFORE_S = 20;
export const BEFORE_S = 10;
const AFTER_S = 5;
/** However many alarms follow each other, a snapshot is no longer than this. */
const LONGEST_S = 30;
/** What a node still owes after this is not waited for. */
const LATE_S = 10;
/** Stretches frozen for alarms that may yet come of them. */
const MAX_FROZEN_BYTES = 48 * 1024 * 1024;
/** Stretches written, remembered for alarms that follow to refer to. */
const MAX_RECENT = 16;
/** Written at a time: the rest waits here, where memory is counted, and leaves room for cuts. */
const MAX_WRITING = 2;
const MAX_NUMBER = 200;
const MAX_AGE_S = 365 * 86_400;
/** Of the space that the agent may have. */
const SHARE_OF_STORAGE = 0.25;

/** Where the snapshots lie. @param directory of the agent's storage. */
export function snapshotFolder(directory: string): string {
  return join(directory, 'snapshots');
}

export class SnapshotKeeper {
  readonly shelf: Shelf;
  readonly flac: FlacRoom;
  /** Snapshots named and not kept: no room, no samples, or the disk refused them. */
  lost = 0;
  readonly #version: string;
  readonly #host: KeeperHost;
  readonly #index: SnapshotIndex;
  /** Stretches that grow, or wait for their alarm, or are being written. */
  readonly #making = new Map<string, Making>();
  readonly #dueS = new Map<string, number>();
  readonly #writing = new Map<string, Promise<Shelved | null>>();
  #recent: Stretch[] = [];
  /** Alarms over their limit, and the stretch that holds their first reading. */
  readonly #pending = new Map<string, string>();
  readonly #shafts = new Map<string, ShaftTag>();
  readonly #ran = new Map<string, boolean>();

  /** Reads what is there and removes what was only half written. @param flac left out, the built worker. */
  constructor(version: string, host: KeeperHost, flac = new FlacRoom()) {
    this.#version = version;
    this.#host = host;
    this.flac = flac;
    const { directory, maxMb } = host.station().storage;
    const folder = snapshotFolder(directory);
    const limits = { number: MAX_NUMBER, bytes: maxMb * 1e6 * SHARE_OF_STORAGE, ageS: MAX_AGE_S };
    this.shelf = new Shelf(folder, limits, {
      runS: () => host.runS(),
      needed: (id) => this.#index.alarmsOf(id).some((alarm) => host.unacknowledged(alarm)),
    });
    this.#index = new SnapshotIndex(folder);
  }

  /** Whether it is still growing or being written. */
  isMaking(id: string): boolean {
    return this.#making.has(id) || this.#writing.has(id);
  }

  counters(): Record<string, number> {
    const { shelf } = this;
    return {
      kept: shelf.all.length,
      bytes: shelf.bytes,
      making: this.#making.size + this.#writing.size,
      lost: this.lost,
      dropped: shelf.dropped,
      cleaned: shelf.cleaned,
    };
  }

  noteReading(machine: string, { shaft }: Reading): void {
    if (shaft.hz === null) this.#shafts.delete(machine);
    else this.#shafts.set(machine, { machine, hz: shaft.hz, source: shaft.source ?? 'unknown' });
  }

  /** @param reading the one that the alarms were just judged by; null: none was. */
  evidence(
    { alarm, pointKey, what }: Extract<AlarmEffect, { kind: 'evidence' }>,
    reading: Reading | null,
  ): void {
    if (what === 'begin') this.#begin(alarm, pointKey, reading);
    else if (what === 'keep') this.#refer(alarm, this.#pending.get(alarm));
    else this.#letGo(alarm);
  }

  /** The snapshot that an alarm, or the alarm of its machine as a whole, is to name; null: none. */
  snapshotOf(alarm: string, state: string): string | null {
    if (state === 'normal') {
      // It is over: should it come again and nothing be frozen for it, this one must not stand for that one.
      this.#indexed(() => this.#index.forget(alarm));
      return null;
    }
    if (state === 'unacknowledged')
      this.#refer(alarm, this.#pending.get(alarm) ?? this.#pendingOfGroup(alarm));
    const id = this.#index.get(alarm);
    return id !== null && this.#isThere(id) ? id : null;
  }

  /** Once a second. */
  tick(): void {
    const nowS = this.#host.monotonicS();
    this.#watchRuns();
    for (const making of this.#making.values()) {
      making.capture.advance();
      if (nowS > (this.#dueS.get(making.id) ?? nowS) + LATE_S) making.capture.cut();
      if (making.capture.done && making.wanted && this.#writing.size < MAX_WRITING) void this.#write(making);
    }
  }

  /**
   * The newest samples of a node, now.
   * @returns the snapshot once it is on the disk.
   * @throws RangeError in words for whoever asked.
   */
  async take(link: string, seconds: number, cause: string): Promise<Shelved> {
    const source = this.#host.source(link);
    if (source === null) throw new RangeError(`link ${link} has had no samples yet`);
    if (source.trouble !== null) throw new RangeError(`link ${link} is not receiving: ${source.trouble}`);
    const machine = this.#machineOn(link);
    const first = source.head - Math.round(seconds * source.rate.hz);
    const making = this.#make(source, machine, first, source.head, 'asked', cause);
    if (making === null) throw new RangeError('there is no room for it at present');
    if (making.capture.samples === 0) {
      this.#forget(making);
      throw new RangeError(`link ${link} has had no samples yet`);
    }
    const shelved = await this.#write(making);
    if (shelved === null) throw new RangeError('it could not be written; the log of the agent says why');
    return shelved;
  }

  /** Writes what there is of what is wanted. */
  async stop(): Promise<void> {
    const wanted = [...this.#making.values()].filter((making) => making.wanted);
    for (const { capture } of wanted) {
      capture.advance();
      capture.cut();
    }
    await Promise.all(this.#writing.values());
    for (const making of wanted) await this.#write(making);
  }

  #begin(alarm: string, pointKey: string, reading: Reading | null): void {
    this.#letGo(alarm);
    const found = this.#find(pointKey);
    const present = found && this.#host.source(found.point.link);
    if (!found || !present) return;
    if (reading !== null && !isOfEpoch(present, reading)) {
      this.#gone(alarm);
      return;
    }
    // The rate of the reading that is over the limit, so that a replay of the snapshot gives that very reading.
    const source = { ...present, rate: reading?.rate ?? present.rate };
    const { first, end } = this.#recordOf(found.machine, found.point, source, reading);
    const rate = source.rate.hz;
    const until = end + Math.round(AFTER_S * rate);
    const making = this.#growing(source, first, end, until);
    if (making) {
      this.#expect(making, source);
      this.#hold(alarm, making);
      return;
    }
    const recent = this.#recent.find((one) => holds(one, source, first, end) && this.#isThere(one.id));
    if (recent) {
      this.#pending.set(alarm, recent.id);
      return;
    }
    const from = Math.min(first, end - Math.round(BEFORE_S * rate));
    const made = this.#make(source, found.machine, from, until, 'alarm', `alarm ${alarm}`);
    if (!made) return;
    if (made.capture.first < end) {
      this.#hold(alarm, made);
      return;
    }
    this.#forget(made);
    this.#gone(alarm);
  }

  /** The samples of the reading are in the ring no more: it was judged late, or its node began anew. */
  #gone(alarm: string): void {
    this.lost++;
    this.#host.log('the samples of a reading over its limit are gone', { alarm });
  }

  /** One that holds the record [first, end), or does now that it is longer; up to `until` where it may. */
  #growing(source: LinkSource, first: number, end: number, until: number): Making | undefined {
    const longest = Math.max(Math.round(LONGEST_S * source.rate.hz), 2 * (end - first));
    const grow = ({ capture }: Making) => this.#extend(capture, Math.min(until, capture.first + longest));
    const makings = [...this.#making.values()];
    const holding = makings.find(({ stretch }) => holds(stretch, source, first, end));
    if (holding) grow(holding);
    return holding ?? makings.find((one) => one.reaches(source, first) && grow(one) >= end);
  }

  /** As far as there is memory for it. @returns index after the last sample that it then holds. */
  #extend(capture: Capture, until: number): number {
    const longerBytes = (until - capture.until) * capture.channels * 4;
    if (this.#frozenBytes() + longerBytes <= MAX_FROZEN_BYTES) capture.extend(until);
    return capture.until;
  }

  #hold(alarm: string, making: Making): void {
    this.#pending.set(alarm, making.id);
    making.holders.add(alarm);
  }

  /** On the shelf, or on its way there. */
  #isThere(id: string): boolean {
    return this.isMaking(id) || this.shelf.get(id) !== null;
  }

  #recordOf(machine: Machine, point: Point, source: LinkSource, reading: Reading | null) {
    if (reading === null) return { first: source.head, end: source.head };
    const { mainsHz } = this.#host.station().site;
    const { recordSamples } = planPoint(point, machine, source.description.nominalRateHz, mainsHz);
    const end = Math.min(source.head, reading.first_index + recordSamples);
    return { first: Math.min(reading.first_index, end), end };
  }

  #make(
    source: LinkSource,
    machine: Machine | null,
    first: number,
    until: number,
    kind: SnapshotKind,
    cause: string,
  ): Making | null {
    const bytes = Math.max(0, until - first) * source.description.channels.length * 4;
    this.#makeRoom(bytes);
    if (this.#frozenBytes() + bytes > MAX_FROZEN_BYTES) {
      this.lost++;
      this.#host.log('no memory for another snapshot', { cause });
      return null;
    }
    const id = nameOf(this.#host.wallMs(), machine?.id ?? source.link);
    const facts = { id, kind, cause, clock: this.#host.clock(), shafts: [...this.#shafts.values()] };
    const making = new Making(this.#host.station(), source, first, until, facts);
    this.#making.set(id, making);
    this.#expect(making, source);
    return making;
  }

  #expect(making: Making, source: LinkSource): void {
    const leftS = Math.max(0, making.capture.until - source.head) / source.rate.hz;
    this.#dueS.set(making.id, this.#host.monotonicS() + leftS);
  }

  /** The oldest that no alarm has come of goes first. */
  #makeRoom(bytes: number): void {
    for (const making of this.#making.values()) {
      if (this.#frozenBytes() + bytes <= MAX_FROZEN_BYTES) return;
      if (!making.wanted) this.#forget(making);
    }
  }

  #frozenBytes(): number {
    return [...this.#making.values()].reduce((sum, { capture }) => sum + capture.bytes, 0);
  }

  #letGo(alarm: string): void {
    const making = this.#making.get(this.#pending.get(alarm) ?? '');
    this.#pending.delete(alarm);
    making?.holders.delete(alarm);
    if (making && making.holders.size === 0 && !making.wanted) this.#forget(making);
  }

  #forget(making: Making): void {
    this.#making.delete(making.id);
    this.#dueS.delete(making.id);
    for (const [alarm, id] of this.#pending) if (id === making.id) this.#pending.delete(alarm);
  }

  #refer(alarm: string, id: string | undefined): void {
    if (id === undefined) return;
    this.#making.get(id)?.alarms.add(alarm);
    this.#indexed(() => this.#index.set(alarm, id, (other) => this.#isThere(other)));
  }

  #indexed(change: () => void): void {
    try {
      change();
    } catch (error) {
      this.#host.log('the index of the snapshots cannot be written', { err: error });
    }
  }

  /** `pump-1/machine.zone` stands for `pump-1/<point>.zone`. */
  #pendingOfGroup(alarm: string): string | undefined {
    const [machine, rule] = alarm.split('/machine.');
    if (machine === undefined || rule === undefined) return undefined;
    const members = [...this.#pending].filter(
      ([key]) => key.startsWith(`${machine}/`) && key.endsWith(`.${rule}`),
    );
    return members.at(-1)?.[1];
  }

  #write(making: Making): Promise<Shelved | null> {
    const { id } = making;
    const { counts, gaps } = making.capture.take();
    this.#making.delete(id);
    this.#dueS.delete(id);
    this.#recent = [...this.#recent, making.stretch].slice(-MAX_RECENT);
    const writing = this.#put(making, counts, gaps).finally(() => this.#writing.delete(id));
    this.#writing.set(id, writing);
    return writing;
  }

  async #put(making: Making, counts: Int32Array[], gaps: SnapshotTags['gaps']): Promise<Shelved | null> {
    const { id } = making;
    try {
      if ((counts[0]?.length ?? 0) === 0) throw new RangeError('its samples are gone');
      const takenRunS = Math.round(this.#host.runS());
      const tags = making.tags({ version: this.#version, takenRunS, gaps });
      await this.flac.run({ kind: 'write', path: this.shelf.pathOf(id), counts, tags });
      return this.shelf.add(id);
    } catch (error) {
      this.lost++;
      this.#recent = this.#recent.filter((other) => other.id !== id);
      this.#host.log('a snapshot could not be written', { id, err: error });
      return null;
    }
  }

  #watchRuns(): void {
    for (const machine of this.#host.station().machines) {
      const running = this.#host.running(machine.id);
      if (running === null) continue;
      const ran = this.#ran.get(machine.id);
      this.#ran.set(machine.id, running);
      if (ran !== undefined && ran !== running) this.#keepRun(machine, running ? 'start' : 'coast-down');
    }
  }

  #keepRun(machine: Machine, kind: 'start' | 'coast-down'): void {
    for (const link of new Set(machine.points.map((point) => point.link))) {
      const source = this.#host.source(link);
      // What a node sent before it fell silent shows no start.
      if (!source || source.trouble !== null) continue;
      const rate = source.rate.hz;
      const first = source.head - Math.round(RUN_BEFORE_S * rate);
      this.#make(
        source,
        machine,
        first,
        source.head + Math.round(AFTER_S * rate),
        kind,
        `${kind} of ${machine.id}`,
      );
    }
  }

  #find(pointKey: string): { machine: Machine; point: Point } | null {
    for (const machine of this.#host.station().machines) {
      const point = machine.points.find(({ key }) => key === pointKey);
      if (point) return { machine, point };
    }
    return null;
  }

  #machineOn(link: string): Machine | null {
    return (
      this.#host.station().machines.find(({ points }) => points.some((point) => point.link === link)) ?? null
    );
  }
}

function isOfEpoch({ epochFirst, head }: LinkSource, { first_index: first }: Reading): boolean {
  return epochFirst <= first && first <= head;
}

/** `20260302T101530Z-pump-1-3f2a`: time, whose, and four digits by chance against a clock that was set back. */
function nameOf(wallMs: number, of: string): string {
  const time = new Date(wallMs).toISOString().replace(/[-:]/g, '').replace(/\.\d+/, '');
  return `${time}-${of}-${randomBytes(2).toString('hex')}`;
}
