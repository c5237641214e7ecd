/**
 * What the agent keeps over restarts, and the narrow interface by which it does so.
 *
 * One `commit` is one transaction: alarm state, journal entry and outbox row stand or fall together. A row leaves the
 * outbox only by `accept` (the broker acknowledged it), by being set aside, by a newer state of the same topic, or by
 * the bounds below; the last three are counted. An alarm leaves the database by `accept` alone.
 *
 * Time in the store is `run time`: seconds that the agent has been running, summed over restarts. It never jumps, and
 * stands still while the power is off. Wall time is only ever a label.
 */

/** In order of right of way. */
export const messageClasses = ['alarm', 'answer', 'state', 'finding', 'health', 'reading', 'trend'] as const;
export type MessageClass = (typeof messageClasses)[number];

/** The order in which classes give way when the outbox is full. Alarms are not in it: they are never dropped. */
export const givesWay: readonly MessageClass[] = ['reading', 'trend', 'health', 'finding', 'answer', 'state'];

/** Classes that say how things are now: a newer message on the same topic makes an unsent older one pointless. */
export const superseded: readonly MessageClass[] = ['state', 'health'];

/** What the reason of a row that is set aside begins with, where another chance may go better. */
export const refusedReason = 'refused';
export const hungUpReason = 'the broker hung up';

export interface OutboxMessage {
  /** The number in the message's id `<store>-<n>`; unique, counts up. */
  n: number;
  class: MessageClass;
  topic: string;
  payload: Uint8Array;
  qos: 0 | 1;
  /** An empty retained payload empties the topic. */
  retain: boolean;
}

export interface OutboxRow extends OutboxMessage {
  /** How often it was sent without being acknowledged. */
  tries: number;
  /** Run time since it was added, in seconds. */
  ageS: number;
}

export interface JournalEntry {
  n: number;
  /** `alarm` or `note`; free for the caller. */
  kind: string;
  /** What it is about: `pump-1/motor-de-h.zone`, or a machine. */
  key: string;
  /** Wall time as it stood then: a label. */
  t: string;
  json: string;
}

export interface TrendValue {
  /** `<machine>/<point>`. */
  point: string;
  watch: string;
  /** Wall time in milliseconds: a label. */
  wallMs: number;
  value: number;
}

export interface BudgetLine {
  /** Number of the period of 24 h of run time. */
  day: number;
  /** A message class, or `link` for what the connection itself costs. */
  class: string;
  sentBytes: number;
  receivedBytes: number;
}

export interface Commit {
  /** The allocator's next number, when numbers were given out that are in no row. */
  nextN?: number;
  /** `json: null` forgets the key. */
  alarmStates?: readonly { key: string; json: string | null }[];
  journal?: readonly JournalEntry[];
  outbox?: readonly OutboxMessage[];
  trend?: readonly TrendValue[];
  baselines?: readonly { key: string; json: string | null }[];
  budget?: readonly BudgetLine[];
}

export interface OpenReport {
  /** Drawn when the database was made: `[a-z0-9]{6}`. */
  storeId: string;
  nextN: number;
  runS: number;
  /** A database that could not be used was moved out of the way: what was wrong and where it is now. */
  setAside?: { reason: string; path: string };
}

export interface BatchQuery {
  max: number;
  /** Topics with a message in flight: one at a time, so that a resend never puts an older state back. */
  busyTopics: readonly string[];
  classes: readonly MessageClass[];
}

export interface JournalQuery {
  /** Entries after this number. */
  afterN?: number;
  /** Entries whose wall time label is at or after this ISO 8601 time. */
  sinceT?: string;
  kind?: string;
  key?: string;
  /** At most this many of those that match, oldest first. */
  limit: number;
  /** Which ones where there are more; the newest unless given. */
  keep?: 'newest' | 'oldest';
}

export interface TrendQuery {
  point: string;
  watch: string;
  fromMs: number;
  toMs: number;
  /** At most so many points; more values than that are averaged over equal spans of time. */
  points: number;
}

/** The end of a series, by run time: wall time may have jumped, and a machine that stood still keeps its last days. */
export interface RecentTrendQuery {
  point: string;
  watch: string;
  /** Run time before the newest value of the series, in seconds. */
  lastS: number;
  /** As in {@link TrendQuery}. */
  points: number;
}

export interface TrendPoint {
  /** Wall time of the last value in the span. */
  wallMs: number;
  /** Run time of the last value in the span, in seconds: for slopes, since wall time may jump. */
  runS: number;
  mean: number;
  min: number;
  max: number;
  count: number;
}

export interface SetAsideRow {
  n: number;
  topic: string;
  reason: string;
}

export interface StoreCounters {
  outbox: { rows: number; bytes: number; oldestS: number | null; byClass: Record<MessageClass, number> };
  setAside: { rows: number; latest: SetAsideRow | null };
  journal: { rows: number; bytes: number };
  trendRows: number;
  /** Rows that gave way to the bounds, by class, since the database was made. */
  dropped: Record<MessageClass, number>;
  /** Rows that a newer state of the same topic replaced before they were sent. */
  superseded: number;
}

export interface StoreLimits {
  outboxRows: number;
  outboxBytes: number;
  /** An answer that waited longer than this is of use to nobody. */
  answerAgeS: number;
  /** Alarms are beside this. */
  setAsideRows: number;
  journalRows: number;
  journalBytes: number;
  journalAgeS: number;
  trendRows: number;
}

/** The same operations, synchronous: SQLite in the worker, and plain memory for a replay. */
export interface StoreEngine {
  open(leastRunS?: number): OpenReport;
  commit(commit: Commit): void;
  batch(query: BatchQuery): OutboxRow[];
  accept(ns: readonly number[]): void;
  reject(n: number, reason: string, poison: boolean): void;
  releaseRefused(): number;
  releaseHungUp(): number;
  resendRetained(): number;
  retainedTopics(): { topic: string; class: MessageClass }[];
  counters(): StoreCounters;
  alarmStates(): Record<string, string>;
  baselines(): Record<string, string>;
  journal(query: JournalQuery): JournalEntry[];
  trend(query: TrendQuery): TrendPoint[];
  recentTrend(query: RecentTrendQuery): TrendPoint[];
  budget(day: number): BudgetLine[];
  close(): void;
}

export interface Store {
  /** @param leastRunS run time goes on from there where the database has seen less, as a fresh one has. */
  open(leastRunS?: number): Promise<OpenReport>;
  /** Durable when it resolves. Alarm states, journal entries and alarm messages go to disk at once, the rest within 0.5 s. */
  commit(commit: Commit): Promise<void>;
  /** What to send next: by class, then by number; at most one row a topic, the oldest of it. */
  batch(query: BatchQuery): Promise<OutboxRow[]>;
  /**
   * The broker acknowledged these: they leave the outbox, and what was retained is remembered. What is set aside of an
   * earlier time of the topic is no longer retained when it is sent after all.
   */
  accept(ns: readonly number[]): Promise<void>;
  /** It was not acknowledged. `poison`: it never will be, so it is set aside where `counters` shows it. */
  reject(n: number, reason: string, options: { poison: boolean }): Promise<void>;
  /** Gives alarms that the broker refused (`refusedReason`) another chance; returns how many. */
  releaseRefused(): Promise<number>;
  /** The same for alarms over which it hung up (`hungUpReason`); their tries stay as they are. */
  releaseHungUp(): Promise<number>;
  /** Puts the last retained message of every topic back into the outbox, where no newer one waits; returns how many. */
  resendRetained(): Promise<number>;
  /** Topics that hold a retained message at the broker or are about to. */
  retainedTopics(): Promise<{ topic: string; class: MessageClass }[]>;
  counters(): Promise<StoreCounters>;
  alarmStates(): Promise<Record<string, string>>;
  baselines(): Promise<Record<string, string>>;
  journal(query: JournalQuery): Promise<JournalEntry[]>;
  trend(query: TrendQuery): Promise<TrendPoint[]>;
  recentTrend(query: RecentTrendQuery): Promise<TrendPoint[]>;
  budget(day: number): Promise<BudgetLine[]>;
  close(): Promise<void>;
}
