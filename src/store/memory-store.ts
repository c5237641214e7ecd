/** The store in plain memory: for a replay, and as the second opinion in the tests. Forgets all when it is closed. */

import { drawStoreId } from './database.ts';
import { rowBytes } from './limits.ts';
import {
  type BatchQuery,
  type BudgetLine,
  type Commit,
  givesWay,
  hungUpReason,
  type JournalEntry,
  type JournalQuery,
  type MessageClass,
  messageClasses,
  type OpenReport,
  type OutboxMessage,
  type OutboxRow,
  type RecentTrendQuery,
  refusedReason,
  type StoreCounters,
  type StoreEngine,
  type StoreLimits,
  superseded,
  type TrendPoint,
  type TrendQuery,
  type TrendValue,
} from './types.ts';

interface Held extends OutboxMessage {
  madeS: number;
  tries: number;
  aside: string | null;
}

export class MemoryStore implements StoreEngine {
  readonly #limits: StoreLimits;
  readonly #runS: () => number;
  readonly #storeId = drawStoreId();
  #nextN = 1;
  #rows = new Map<number, Held>();
  #journal: (JournalEntry & { madeS: number })[] = [];
  #trend: (TrendValue & { runS: number })[] = [];
  readonly #alarms = new Map<string, string>();
  readonly #baselines = new Map<string, string>();
  readonly #budget = new Map<string, BudgetLine>();
  readonly #retained = new Map<string, OutboxMessage>();
  readonly #dropped = Object.fromEntries(messageClasses.map((name) => [name, 0])) as Record<
    MessageClass,
    number
  >;
  #superseded = 0;

  /** `runS`: seconds of run time. */
  constructor(limits: StoreLimits, runS: () => number) {
    this.#limits = limits;
    this.#runS = runS;
  }

  open(): OpenReport {
    return { storeId: this.#storeId, nextN: this.#nextN, runS: this.#runS() };
  }

  commit(commit: Commit): void {
    const runS = this.#runS();
    for (const message of commit.outbox ?? []) this.#add(message, runS);
    for (const entry of commit.journal ?? []) {
      if (!this.#journal.some((old) => old.n === entry.n)) this.#journal.push({ ...entry, madeS: runS });
    }
    put(this.#alarms, commit.alarmStates ?? []);
    put(this.#baselines, commit.baselines ?? []);
    for (const value of commit.trend ?? []) this.#trend.push({ ...value, runS });
    for (const line of commit.budget ?? []) this.#budget.set(`${line.day} ${line.class}`, { ...line });
    this.#nextN = Math.max(
      this.#nextN,
      commit.nextN ?? 0,
      ...[...(commit.outbox ?? []), ...(commit.journal ?? [])].map((row) => row.n + 1),
    );
    this.#bound(runS);
  }

  batch(query: BatchQuery): OutboxRow[] {
    const runS = this.#runS();
    const first = new Map<string, Held>();
    for (const row of this.#pending()) {
      const other = first.get(row.topic);
      if (other === undefined || row.n < other.n) first.set(row.topic, row);
    }
    return [...first.values()]
      .filter((row) => query.classes.includes(row.class) && !query.busyTopics.includes(row.topic))
      .filter((row) => row.class !== 'answer' || row.madeS >= runS - this.#limits.answerAgeS)
      .sort(byRight)
      .slice(0, Math.max(0, query.max))
      .map(({ madeS, aside: _, ...row }) => ({ ...row, ageS: runS - madeS }));
  }

  accept(ns: readonly number[]): void {
    for (const n of ns) {
      const row = this.#rows.get(n);
      if (row === undefined) continue;
      if (row.retain) {
        const known = this.#retained.get(row.topic);
        if (row.payload.byteLength === 0) this.#retained.delete(row.topic);
        else if (known === undefined || row.n >= known.n) this.#retained.set(row.topic, row);
        for (const old of this.#aside()) if (old.topic === row.topic && old.n < row.n) old.retain = false;
      }
      this.#rows.delete(n);
    }
  }

  reject(n: number, reason: string, poison: boolean): void {
    const row = this.#rows.get(n);
    if (row === undefined) return;
    row.tries++;
    if (!poison) return;
    row.aside ??= reason;
    if (reason.startsWith(refusedReason) && row.class === 'alarm') {
      for (const other of this.#pending())
        if (other.class === 'alarm' && other.topic === row.topic) other.aside = reason;
    }
    const bounded = this.#aside().filter((held) => held.class !== 'alarm');
    for (const old of bounded.slice(0, Math.max(0, bounded.length - this.#limits.setAsideRows)))
      this.#drop(old);
  }

  releaseRefused(): number {
    return this.#release([refusedReason]);
  }

  releaseHungUp(): number {
    return this.#release([hungUpReason]);
  }

  resendRetained(): number {
    const waiting = new Set(this.#pending().flatMap((row) => (row.retain ? [row.topic] : [])));
    let count = 0;
    for (const [topic, message] of this.#retained) {
      if (waiting.has(topic) || this.#rows.has(message.n)) continue;
      this.#rows.set(message.n, { ...plain(message), madeS: this.#runS(), tries: 0, aside: null });
      count++;
    }
    return count;
  }

  retainedTopics(): { topic: string; class: MessageClass }[] {
    const topics = new Map<string, MessageClass>();
    for (const row of [...this.#retained.values(), ...this.#pending().filter((held) => held.retain)]) {
      const other = topics.get(row.topic);
      if (other === undefined || messageClasses.indexOf(row.class) < messageClasses.indexOf(other)) {
        topics.set(row.topic, row.class);
      }
    }
    return [...topics]
      .map(([topic, name]) => ({ topic, class: name }))
      .sort((a, b) => (a.topic < b.topic ? -1 : 1));
  }

  counters(): StoreCounters {
    const pending = this.#pending().sort((a, b) => a.n - b.n);
    const aside = this.#aside();
    const latest = aside.at(-1);
    const byClass = Object.fromEntries(
      messageClasses.map((name) => [name, pending.filter((row) => row.class === name).length]),
    ) as Record<MessageClass, number>;
    const oldest = pending[0];
    return {
      outbox: {
        rows: pending.length,
        bytes: sum(pending, rowBytes),
        oldestS: oldest === undefined ? null : this.#runS() - oldest.madeS,
        byClass,
      },
      setAside: {
        rows: aside.length,
        latest: latest === undefined ? null : { n: latest.n, topic: latest.topic, reason: latest.aside! },
      },
      journal: { rows: this.#journal.length, bytes: sum(this.#journal, entryLength) },
      trendRows: this.#trend.length,
      dropped: { ...this.#dropped },
      superseded: this.#superseded,
    };
  }

  alarmStates(): Record<string, string> {
    return Object.fromEntries(this.#alarms);
  }

  baselines(): Record<string, string> {
    return Object.fromEntries(this.#baselines);
  }

  journal(query: JournalQuery): JournalEntry[] {
    const found = this.#journal
      .filter((entry) => entry.n > (query.afterN ?? 0) && entry.t >= (query.sinceT ?? ''))
      .filter((entry) => (query.kind ?? entry.kind) === entry.kind && (query.key ?? entry.key) === entry.key)
      .sort((a, b) => a.n - b.n)
      .map(({ madeS: _, ...entry }) => entry);
    if (query.limit <= 0) return [];
    return query.keep === 'oldest' ? found.slice(0, query.limit) : found.slice(-query.limit);
  }

  trend(query: TrendQuery): TrendPoint[] {
    const spans = new Map<number, (TrendValue & { runS: number })[]>();
    for (const value of this.#trend) {
      if (value.point !== query.point || value.watch !== query.watch) continue;
      if (value.wallMs < query.fromMs || value.wallMs > query.toMs) continue;
      const span = Math.floor(
        ((value.wallMs - query.fromMs) * query.points) / (query.toMs - query.fromMs + 1),
      );
      spans.set(span, [...(spans.get(span) ?? []), value]);
    }
    return [...spans.values()].map(trendPoint).sort((a, b) => a.wallMs - b.wallMs);
  }

  recentTrend({ point, watch, lastS, points }: RecentTrendQuery): TrendPoint[] {
    const series = this.#trend.filter((value) => value.point === point && value.watch === watch);
    const end = Math.max(...series.map(({ runS }) => runS));
    const spans = new Map<number, (TrendValue & { runS: number })[]>();
    for (const value of series.filter(({ runS }) => runS > end - lastS)) {
      const span = Math.floor(((end - value.runS) * points) / lastS);
      spans.set(span, [...(spans.get(span) ?? []), value]);
    }
    return [...spans.values()].map(trendPoint).sort((a, b) => a.runS - b.runS);
  }

  budget(day: number): BudgetLine[] {
    return [...this.#budget.values()]
      .filter((line) => line.day === day)
      .sort((a, b) => (a.class < b.class ? -1 : 1));
  }

  close(): void {}

  #pending(): Held[] {
    return [...this.#rows.values()].filter((row) => row.aside === null);
  }

  #aside(): Held[] {
    return [...this.#rows.values()].filter((row) => row.aside !== null).sort((a, b) => a.n - b.n);
  }

  #release(reasons: readonly string[], topic?: string): number {
    const going = this.#aside().filter(
      (row) =>
        row.class === 'alarm' &&
        (topic === undefined || row.topic === topic) &&
        reasons.some((reason) => row.aside?.startsWith(reason)),
    );
    for (const row of going) row.aside = null;
    return going.length;
  }

  #add(message: OutboxMessage, runS: number): void {
    if (message.class === 'alarm') this.#release([refusedReason, hungUpReason], message.topic);
    if (superseded.includes(message.class)) {
      for (const row of this.#pending()) {
        if (row.topic !== message.topic || row.class !== message.class || row.n >= message.n) continue;
        this.#rows.delete(row.n);
        this.#superseded++;
      }
    }
    if (!this.#rows.has(message.n))
      this.#rows.set(message.n, { ...message, madeS: runS, tries: 0, aside: null });
  }

  #bound(runS: number): void {
    const pending = this.#pending().sort((a, b) => a.n - b.n);
    for (const row of pending) {
      if (row.class === 'answer' && row.madeS < runS - this.#limits.answerAgeS) this.#drop(row);
    }
    let rows = this.#pending().length;
    let bytes = sum(this.#pending(), rowBytes);
    for (const row of givesWay.flatMap((name) => pending.filter((held) => held.class === name))) {
      if (rows <= this.#limits.outboxRows && bytes <= this.#limits.outboxBytes) break;
      if (!this.#rows.has(row.n)) continue;
      this.#drop(row);
      rows--;
      bytes -= rowBytes(row);
    }
    const newest = this.#journal.at(-1);
    this.#journal = this.#journal.filter((e) => e.madeS >= runS - this.#limits.journalAgeS || e === newest);
    let journalBytes = sum(this.#journal, entryLength);
    while (
      this.#journal.length > 1 &&
      (this.#journal.length > this.#limits.journalRows || journalBytes > this.#limits.journalBytes)
    ) {
      journalBytes -= entryLength(this.#journal.shift()!);
    }
    if (this.#trend.length > this.#limits.trendRows) this.#trend = this.#trend.slice(-this.#limits.trendRows);
  }

  #drop(row: Held): void {
    this.#rows.delete(row.n);
    this.#dropped[row.class]++;
  }
}

function put(map: Map<string, string>, changes: readonly { key: string; json: string | null }[]): void {
  for (const { key, json } of changes) {
    if (json === null) map.delete(key);
    else map.set(key, json);
  }
}

function trendPoint(values: readonly (TrendValue & { runS: number })[]): TrendPoint {
  return {
    wallMs: Math.max(...values.map((v) => v.wallMs)),
    runS: Math.max(...values.map((v) => v.runS)),
    mean: sum(values, (v) => v.value) / values.length,
    min: Math.min(...values.map((v) => v.value)),
    max: Math.max(...values.map((v) => v.value)),
    count: values.length,
  };
}

function sum<T>(items: readonly T[], of: (item: T) => number): number {
  return items.reduce((total, item) => total + of(item), 0);
}

function entryLength(entry: JournalEntry): number {
  return entry.json.length + entry.key.length;
}

function byRight(a: OutboxMessage, b: OutboxMessage): number {
  return messageClasses.indexOf(a.class) - messageClasses.indexOf(b.class) || a.n - b.n;
}

function plain({ n, class: name, topic, payload, qos, retain }: OutboxMessage): OutboxMessage {
  return { n, class: name, topic, payload, qos, retain };
}
