/**
 * Baselines of the running agent: samples are collected for some hours, proposed as learned values, and in force once
 * somebody accepts them. All of it is kept in the store, so that a restart costs a few minutes of samples and no more.
 */

import { type Baseline, type Learned, learnBaseline, learnSample } from '../alarm/baseline.ts';
import { addSample, type LearnSamples, NO_SAMPLES } from '../alarm/learn-samples.ts';
import type { AlarmPlan } from '../alarm/plan.ts';
import type { EngineState } from '../alarm/state.ts';
import type { Reading } from '../measure/reading.ts';
import type { Commit } from '../store/types.ts';
import { AskRefused } from '../uplink/asks.ts';
import { type BaselineAnswer, baselineAnswer } from './baseline-answer.ts';
import { trendWatches } from './trend-watches.ts';

export interface LearningHost {
  /** The plan in force. */
  plan(): AlarmPlan;
  /** Durable when it resolves; with a note for the journal of the machine. */
  commit(
    commit: Pick<Commit, 'baselines'>,
    note?: { machine: string; by: string | null; text: string },
  ): Promise<void>;
  /** Collected samples could not be written; they are tried again. */
  failed(error: unknown): void;
  now(): string;
}

/** A learning that is under way. */
export interface LearningRun {
  readonly since: string;
  readonly hours: number;
  /** Time of the running agent, kept as what is left. */
  readonly leftS: number;
}

export interface PointLearning {
  readonly samples: LearnSamples;
  readonly proposed: { readonly t: string; readonly learned: Learned } | null;
  readonly accepted: { readonly t: string; readonly baseline: Baseline } | null;
}

const NOTHING: PointLearning = { samples: NO_SAMPLES, proposed: null, accepted: null };
const VERSION = 1;
/** Samples are written this often while learning: cards wear out. */
const SAVE_S = 300;
const USUAL_HOURS = 24;

type Row = { key: string; json: string | null };

export class Learning {
  readonly #host: LearningHost;
  readonly #runs = new Map<string, LearningRun>();
  readonly #points = new Map<string, PointLearning>();
  /** Rows of learning that ended because its machine left: it must not go on by itself should that come back. */
  readonly #gone = new Set<string>();
  #unsavedS = 0;
  /** One thing after the other: what is asked, what ends by itself, what is written. */
  #last: Promise<unknown> = Promise.resolve();
  #busy = false;

  /** @param rows what the store kept; rows of another version or of what has left the configuration are passed over. */
  constructor(rows: Readonly<Record<string, string>>, host: LearningHost) {
    this.#host = host;
    for (const [key, json] of Object.entries(rows)) this.#restore(key, JSON.parse(json));
  }

  /** What is in force at a point; null: nothing was accepted. */
  baselineOf(pointKey: string): Baseline | null {
    return this.#points.get(pointKey)?.accepted?.baseline ?? null;
  }

  /** A reading, with the alarm state that it led to: only what counts there is learned from. */
  take(pointKey: string, reading: Reading, state: EngineState): void {
    const plan = this.#host.plan();
    const place = plan.points.get(pointKey);
    const row = state.points[pointKey];
    if (!place || !row || !this.#runs.has(place.machine.id)) return;
    if (row.startedS !== null || row.uncountedS > 0) return;
    const sample = learnSample(reading, trendWatches(plan.station));
    if (sample === null) return;
    // The zones of one point speak for the machine: its axial readings have none.
    const highZone = sample.highZone || this.#highPoint(place.machine.id, state) !== null;
    const before = this.#of(pointKey);
    this.#points.set(pointKey, { ...before, samples: addSample(before.samples, { ...sample, highZone }) });
  }

  /** Time of the running agent passes. */
  tick(elapsedS: number): void {
    this.#endOfThoseThatLeft();
    if (this.#runs.size === 0 && this.#gone.size === 0) return;
    for (const [machine, run] of this.#runs)
      this.#runs.set(machine, { ...run, leftS: Math.max(0, run.leftS - elapsedS) });
    this.#unsavedS += elapsedS;
    const over = [...this.#runs.values()].some(({ leftS }) => leftS === 0);
    if (this.#busy || !(over || this.#gone.size > 0 || this.#unsavedS >= SAVE_S)) return;
    this.#busy = true;
    void this.#inTurn(() => this.#advance())
      .catch((error) => this.#host.failed(error))
      .finally(() => {
        this.#busy = false;
      });
  }

  /** Writes what was collected since. */
  async stop(): Promise<void> {
    await this.#inTurn(() => this.#save()).catch((error) => this.#host.failed(error));
  }

  start(
    machine: string,
    hours: number | undefined,
    by: string | null,
    state: EngineState,
  ): Promise<BaselineAnswer> {
    return this.#inTurn(async () => {
      const points = this.#pointsOf(machine);
      const under = this.#runs.get(machine);
      if (under) {
        throw new AskRefused(`learning is under way since ${under.since}: action reject ends it`);
      }
      const high = this.#highPoint(machine, state);
      if (high !== null) {
        throw new AskRefused(
          `${machine}/${high.id} is in zone ${high.zone}: a baseline is learned from a machine that is well`,
        );
      }
      const run = {
        since: this.#host.now(),
        hours: hours ?? USUAL_HOURS,
        leftS: 3600 * (hours ?? USUAL_HOURS),
      };
      const rows = points.flatMap((key): Row[] => [
        { key: `proposed:${key}`, json: null },
        { key: `samples:${key}`, json: null },
      ]);
      rows.push({ key: `learning:${machine}`, json: JSON.stringify({ v: VERSION, ...run }) });
      const text = `learning a baseline for ${run.hours} h`;
      await this.#host.commit({ baselines: rows }, { machine, by, text });
      for (const { key } of rows) this.#gone.delete(key);
      this.#runs.set(machine, run);
      for (const key of points)
        this.#points.set(key, { ...this.#of(key), samples: NO_SAMPLES, proposed: null });
      return this.#answer(machine);
    });
  }

  accept(machine: string, by: string | null): Promise<BaselineAnswer> {
    return this.#inTurn(async () => {
      const points = this.#pointsOf(machine);
      const run = this.#runs.get(machine);
      if (run) {
        throw new AskRefused(`learning is under way for ${(run.leftS / 3600).toFixed(2)} h more`);
      }
      const t = this.#host.now();
      const accepted = new Map<string, NonNullable<PointLearning['accepted']>>();
      for (const key of points) {
        const learned = this.#of(key).proposed?.learned;
        if (learned?.ok) accepted.set(key, { t, baseline: learned.baseline });
      }
      if (accepted.size === 0) throw new AskRefused(this.#nothingToAccept(machine, points));
      const rows = [...accepted].flatMap(([key, value]): Row[] => [
        { key: `accepted:${key}`, json: JSON.stringify({ v: VERSION, ...value }) },
        { key: `proposed:${key}`, json: null },
      ]);
      const text = `baseline accepted of ${[...accepted.keys()].join(', ')}`;
      await this.#host.commit({ baselines: rows }, { machine, by, text });
      for (const [key, value] of accepted) {
        this.#points.set(key, { ...this.#of(key), proposed: null, accepted: value });
      }
      return this.#answer(machine);
    });
  }

  /** Ends a learning under way or puts a proposal aside; what was accepted before stays in force. */
  reject(machine: string, by: string | null): Promise<BaselineAnswer> {
    return this.#inTurn(async () => {
      const points = this.#pointsOf(machine);
      const proposed = points.some((key) => this.#of(key).proposed !== null);
      if (!this.#runs.has(machine) && !proposed) {
        throw new AskRefused('nothing to reject: no learning is under way and none is proposed');
      }
      const rows = points.flatMap((key): Row[] => [
        { key: `proposed:${key}`, json: null },
        { key: `samples:${key}`, json: null },
      ]);
      rows.push({ key: `learning:${machine}`, json: null });
      await this.#host.commit({ baselines: rows }, { machine, by, text: 'learned values rejected' });
      this.#runs.delete(machine);
      for (const key of points)
        this.#points.set(key, { ...this.#of(key), samples: NO_SAMPLES, proposed: null });
      return this.#answer(machine);
    });
  }

  show(machine: string): Promise<BaselineAnswer> {
    return this.#inTurn(async () => {
      this.#pointsOf(machine);
      return this.#answer(machine);
    });
  }

  #answer(machine: string): BaselineAnswer {
    const points = this.#pointsOf(machine).map(
      (key) => [key.slice(machine.length + 1), this.#of(key)] as const,
    );
    return baselineAnswer(machine, this.#runs.get(machine) ?? null, Object.fromEntries(points));
  }

  async #advance(): Promise<void> {
    this.#endOfThoseThatLeft();
    for (const [machine, { leftS }] of this.#runs) if (leftS === 0) await this.#propose(machine);
    if (this.#gone.size > 0 || this.#unsavedS >= SAVE_S) await this.#save();
  }

  #endOfThoseThatLeft(): void {
    for (const machine of this.#runs.keys()) {
      if (this.#host.plan().machines.has(machine)) continue;
      this.#runs.delete(machine);
      this.#gone.add(`learning:${machine}`);
      for (const [key, point] of this.#points) {
        if (!key.startsWith(`${machine}/`)) continue;
        this.#points.set(key, { ...point, samples: NO_SAMPLES });
        this.#gone.add(`samples:${key}`);
      }
    }
  }

  async #propose(machine: string): Promise<void> {
    const t = this.#host.now();
    const proposals = this.#pointsOf(machine).map((key) => {
      return [key, { t, learned: learnBaseline(this.#of(key).samples.kept) }] as const;
    });
    const rows = proposals.flatMap(([key, value]): Row[] => [
      { key: `proposed:${key}`, json: JSON.stringify({ v: VERSION, ...value }) },
      { key: `samples:${key}`, json: null },
    ]);
    rows.push({ key: `learning:${machine}`, json: null });
    await this.#host.commit({ baselines: rows });
    this.#runs.delete(machine);
    for (const [key, proposed] of proposals) {
      this.#points.set(key, { ...this.#of(key), samples: NO_SAMPLES, proposed });
    }
  }

  async #save(): Promise<void> {
    this.#endOfThoseThatLeft();
    const gone = [...this.#gone];
    if (this.#runs.size === 0 && gone.length === 0) return;
    const rows = [...this.#runs].flatMap(([machine, run]): Row[] => [
      { key: `learning:${machine}`, json: JSON.stringify({ v: VERSION, ...run }) },
      ...this.#pointsOf(machine).map((key) => ({
        key: `samples:${key}`,
        json: JSON.stringify({ v: VERSION, ...this.#of(key).samples }),
      })),
    ]);
    rows.push(...gone.map((key) => ({ key, json: null })));
    this.#unsavedS = 0;
    await this.#host.commit({ baselines: rows });
    for (const key of gone) this.#gone.delete(key);
  }

  #restore(rowKey: string, row: { v: number } & Record<string, unknown>): void {
    const colon = rowKey.indexOf(':');
    const [of, key] = [rowKey.slice(0, colon), rowKey.slice(colon + 1)];
    const { v, ...value } = row;
    if (v !== VERSION) return;
    const { machines, points } = this.#host.plan();
    if (of === 'learning' && machines.has(key)) this.#runs.set(key, value as unknown as LearningRun);
    else if (points.has(key)) this.#points.set(key, { ...this.#of(key), [of]: value });
    else if (of === 'learning' || of === 'samples') this.#gone.add(rowKey);
  }

  #highPoint(machine: string, state: EngineState): { id: string; zone: string } | null {
    for (const { key, id } of this.#host.plan().machines.get(machine)?.machine.points ?? []) {
      const zone = state.points[key]?.zone ?? null;
      if (zone === 'C' || zone === 'D') return { id, zone };
    }
    return null;
  }

  #nothingToAccept(machine: string, points: readonly string[]): string {
    const refused = points.flatMap((key) => {
      const learned = this.#of(key).proposed?.learned;
      return learned && !learned.ok ? [`${key.slice(machine.length + 1)}: ${learned.reason}`] : [];
    });
    if (refused.length === 0) return 'nothing to accept: nothing was learned; action start begins';
    return `nothing to accept: ${refused.slice(0, 8).join('; ')}`;
  }

  #of(pointKey: string): PointLearning {
    return this.#points.get(pointKey) ?? NOTHING;
  }

  #pointsOf(machine: string): string[] {
    const entry = this.#host.plan().machines.get(machine);
    if (!entry) throw new AskRefused(`there is no machine ${machine}`);
    return entry.machine.points.map(({ key }) => key);
  }

  #inTurn<T>(work: () => Promise<T>): Promise<T> {
    const turn = this.#last.then(work);
    this.#last = turn.catch(() => undefined);
    return turn;
  }
}
