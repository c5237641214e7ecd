/**
 * Alarm inputs one after the other: step, commit, and only then does the new state count. While the database cannot
 * be written the step is tried again with the same effects and the rest waits, within bounds.
 */

import type { AlarmEffect, AlarmInput } from '../alarm/effects.ts';
import type { AlarmPayload } from '../alarm/payload.ts';
import type { AlarmPlan } from '../alarm/plan.ts';
import type { Reading } from '../measure/reading.ts';
import type { Commit, JournalEntry, MessageClass, OutboxMessage } from '../store/types.ts';
import { journalEntryOf, numberOf } from './journal-entry.ts';
import { asOneTick, giveUpOne, type Waiting } from './judge-queue.ts';
import type { Judging } from './judging.ts';

export interface JudgeHost {
  /** Durable when it resolves. */
  commit(commit: Commit): Promise<void>;
  /** Full topic of one below `forebay/<site>/`. */
  topic(name: string): string;
  /** A message that empties a retained topic. */
  emptying(name: MessageClass, topic: string): OutboxMessage;
  /** Rows for the broker are in the outbox. */
  committed(): void;
  /** A reading is over a limit, or what came of it: told of a beginning before the commit, so that none is missed. */
  evidence(effect: Extract<AlarmEffect, { kind: 'evidence' }>, reading: Reading | null): void;
  /** The waveform that an alarm in this state refers to. */
  snapshotOf(alarm: string, state: string): string | null;
  commitFailed(error: unknown): void;
  /** The input was given up. */
  inputFailed(error: unknown): void;
  monotonicS(): number;
}

/** Inputs that may wait while the database cannot be written: an hour of ten points at ten seconds. */
const MAX_WAITING = 3600;
const RETRY_MS = 1000;
/** Rows that nothing hangs on (hours run, timers) are written this often at most: cards wear out. */
const IDLE_ROWS_S = 60;

export class LiveJudge {
  /** Inputs given up because too many waited; a reading is lost to the alarms, an ask is refused. */
  dropped = 0;
  readonly #judging: Judging;
  readonly #host: JudgeHost;
  readonly #queue: Waiting[] = [];
  readonly #idleRows = new Map<string, string | null>();
  #idleSinceS: number | null = null;
  #running: Promise<void> | null = null;
  #stopped = false;

  constructor(judging: Judging, host: JudgeHost) {
    this.#judging = judging;
    this.#host = host;
  }

  get waiting(): number {
    return this.#queue.length;
  }

  /** Resolves with the effects once they are durable; with none where the input was given up. */
  take(input: AlarmInput): Promise<readonly AlarmEffect[]> {
    const last = this.#queue.at(-1);
    const tick = asOneTick(last, input);
    if (tick !== null) {
      this.#queue.splice(-1, 1, { ...last!, input: tick });
      return Promise.resolve([]);
    }
    return new Promise((resolve) => {
      this.#queue.push({ input, resolve });
      if (this.#queue.length > MAX_WAITING) {
        const given = giveUpOne(this.#queue);
        if (given) this.dropped++;
        given?.resolve([]);
      }
      this.#start();
    });
  }

  /** Judges by another plan whatever is taken from now on. Resolves once that is durable. */
  replan(plan: AlarmPlan, t: string): Promise<void> {
    return new Promise((resolve) => {
      this.#queue.push({ plan, t, resolve: () => resolve() });
      this.#start();
    });
  }

  /** Commits what effects the restored state asks for. */
  async restore(effects: readonly AlarmEffect[]): Promise<void> {
    await this.#commit(effects);
  }

  /** Judges what waits and writes the idle rows; gives up where the database does not take them. */
  async stop(): Promise<void> {
    this.#stopped = true;
    while (this.#running) await this.#running;
    if (this.#idleRows.size > 0)
      await this.#host.commit({ alarmStates: this.#takeIdleRows() }).catch(() => undefined);
  }

  #start(): void {
    this.#running ??= this.#run().finally(() => {
      this.#running = null;
      if (this.#queue.length > 0) this.#start();
    });
  }

  async #run(): Promise<void> {
    for (let next = this.#queue.shift(); next; next = this.#queue.shift()) {
      try {
        await this.#judge(next);
      } catch (error) {
        // A fault in judging one input must not silence the alarms of all later ones.
        this.dropped++;
        this.#host.inputFailed(error);
        next.resolve([]);
      }
    }
  }

  async #judge(next: Waiting): Promise<void> {
    const { effects, keep } =
      'plan' in next ? this.#judging.replan(next.plan, next.t) : this.#judging.step(next.input);
    const reading = 'input' in next && next.input.kind === 'reading' ? next.input.reading : null;
    const evidence = effects.filter((effect) => effect.kind === 'evidence');
    for (const effect of evidence) if (effect.what === 'begin') this.#host.evidence(effect, reading);
    const durable = await this.#commit(effects);
    if (durable) keep();
    next.resolve(durable ? effects : []);
    for (const effect of evidence) if (effect.what !== 'begin') this.#host.evidence(effect, reading);
  }

  /** Until it is durable, or the agent stops. */
  async #commit(effects: readonly AlarmEffect[]): Promise<boolean> {
    const commit = this.#commitOf(effects);
    if (commit === null) return true;
    for (;;) {
      try {
        await this.#host.commit(commit);
        this.#host.committed();
        return true;
      } catch (error) {
        this.#host.commitFailed(error);
        if (this.#stopped) return false;
        await new Promise((resolve) => setTimeout(resolve, RETRY_MS));
      }
    }
  }

  /** null: nothing that cannot wait. */
  #commitOf(effects: readonly AlarmEffect[]): Commit | null {
    const journal: JournalEntry[] = [];
    const outbox: OutboxMessage[] = [];
    let urgent = false;
    for (const effect of effects) {
      switch (effect.kind) {
        case 'row':
          this.#idleRows.set(effect.key, effect.row && JSON.stringify(effect.row));
          urgent ||= effect.urgent;
          break;
        case 'journal':
          journal.push(
            journalEntryOf({ ...effect.entry, payload: this.#named(effect.entry.key, effect.entry.payload) }),
          );
          break;
        case 'publish': {
          const payload =
            effect.class === 'alarm'
              ? this.#named(effect.topic.replace('/alarm/', '/'), effect.payload)
              : effect.payload;
          outbox.push({
            n: numberOf(effect.payload.id),
            class: effect.class,
            topic: this.#host.topic(effect.topic),
            payload: Buffer.from(JSON.stringify(payload)),
            qos: 1,
            retain: true,
          });
          break;
        }
        case 'withdraw':
          outbox.push(this.#host.emptying('alarm', this.#host.topic(effect.topic)));
          break;
      }
    }
    if (!urgent && journal.length === 0 && outbox.length === 0 && !this.#idleDue()) return null;
    return { alarmStates: this.#takeIdleRows(), journal, outbox };
  }

  /** With the waveform that it refers to. */
  #named(alarm: string, payload: AlarmPayload): AlarmPayload {
    if (payload.test) return payload;
    return { ...payload, snapshot: this.#host.snapshotOf(alarm, payload.state) };
  }

  #idleDue(): boolean {
    if (this.#idleRows.size === 0) return false;
    const now = this.#host.monotonicS();
    this.#idleSinceS ??= now;
    return now - this.#idleSinceS >= IDLE_ROWS_S;
  }

  #takeIdleRows(): { key: string; json: string | null }[] {
    const rows = [...this.#idleRows].map(([key, json]) => ({ key, json }));
    this.#idleRows.clear();
    this.#idleSinceS = null;
    return rows;
  }
}
