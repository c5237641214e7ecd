import type { Database, Statement } from 'better-sqlite3';
import type {
  BudgetLine,
  Commit,
  JournalEntry,
  JournalQuery,
  RecentTrendQuery,
  StoreCounters,
  StoreLimits,
  TrendPoint,
  TrendQuery,
} from './types.ts';

const budgetDaysKept = 8;
const dropStep = 256;
/** Free pages are used again; only a surplus is given back, for writing them wears the card. */
const freePagesKept = 1024;

/** Journal, alarm states, baselines, trend and budget. Every method runs inside the caller's transaction. */
export class Records {
  readonly #limits: StoreLimits;
  readonly #sql: Record<RecordStatement, Statement>;
  readonly #db: Database;

  constructor(db: Database, limits: StoreLimits) {
    this.#db = db;
    this.#limits = limits;
    this.#sql = Object.fromEntries(
      Object.entries(statements).map(([name, sql]) => [name, db.prepare(sql)]),
    ) as unknown as Record<RecordStatement, Statement>;
  }

  write(commit: Commit, runS: number): void {
    for (const { key, json } of commit.alarmStates ?? []) {
      if (json === null) this.#sql.forgetAlarm.run(key);
      else this.#sql.putAlarm.run(key, json);
    }
    for (const { key, json } of commit.baselines ?? []) {
      if (json === null) this.#sql.forgetBaseline.run(key);
      else this.#sql.putBaseline.run(key, json);
    }
    for (const e of commit.journal ?? []) this.#sql.addJournal.run(e.n, e.kind, e.key, e.t, e.json, runS);
    for (const v of commit.trend ?? []) this.#sql.addTrend.run(v.point, v.watch, v.wallMs, runS, v.value);
    for (const b of commit.budget ?? []) {
      this.#sql.putBudget.run(b.day, b.class, b.sentBytes, b.receivedBytes);
      this.#sql.pruneBudget.run(b.day - budgetDaysKept);
    }
  }

  /** The oldest journal entries and trend values go; both are history, what is still to be sent is in the outbox. */
  bound(runS: number): void {
    this.#sql.expireJournal.run(runS - this.#limits.journalAgeS);
    for (;;) {
      const { rows, bytes } = this.#sql.total.get('journal') as { rows: number; bytes: number };
      if (rows <= 1 || (rows <= this.#limits.journalRows && bytes <= this.#limits.journalBytes)) break;
      const surplus = rows - this.#limits.journalRows;
      const share = Math.ceil((rows * Math.max(0, bytes - this.#limits.journalBytes)) / bytes);
      this.#sql.dropJournal.run(Math.min(dropStep, Math.max(1, surplus, Math.floor(share / 2))));
    }
    const trend = this.#sql.total.get('trend') as { rows: number };
    if (trend.rows > this.#limits.trendRows) this.#sql.dropTrend.run(trend.rows - this.#limits.trendRows);
    const free = this.#db.pragma('freelist_count', { simple: true }) as number;
    if (free > freePagesKept) this.#db.pragma('incremental_vacuum(256)');
  }

  counters(): Pick<StoreCounters, 'journal' | 'trendRows'> {
    return {
      journal: this.#sql.total.get('journal') as { rows: number; bytes: number },
      trendRows: (this.#sql.total.get('trend') as { rows: number }).rows,
    };
  }

  alarmStates(): Record<string, string> {
    return keyed(this.#sql.alarms.all());
  }

  baselines(): Record<string, string> {
    return keyed(this.#sql.baselines.all());
  }

  journal(query: JournalQuery): JournalEntry[] {
    const oldest = query.keep === 'oldest';
    const rows = this.#sql[oldest ? 'journalFrom' : 'journal'].all({
      after: query.afterN ?? 0,
      since: query.sinceT ?? '',
      kind: query.kind ?? null,
      key: query.key ?? null,
      limit: Math.max(0, query.limit),
    });
    return oldest ? (rows as JournalEntry[]) : (rows as JournalEntry[]).reverse();
  }

  trend(query: TrendQuery): TrendPoint[] {
    return this.#sql.trend.all({
      point: query.point,
      watch: query.watch,
      from: query.fromMs,
      to: query.toMs,
      spans: query.points,
      width: query.toMs - query.fromMs + 1,
    }) as TrendPoint[];
  }

  recentTrend({ point, watch, lastS, points }: RecentTrendQuery): TrendPoint[] {
    return this.#sql.recentTrend.all({ point, watch, last: lastS, spans: points }) as TrendPoint[];
  }

  budget(day: number): BudgetLine[] {
    return this.#sql.budget.all(day) as BudgetLine[];
  }
}

function keyed(rows: readonly unknown[]): Record<string, string> {
  return Object.fromEntries((rows as { key: string; json: string }[]).map((row) => [row.key, row.json]));
}

type RecordStatement = keyof typeof statements;

const statements = {
  putAlarm: 'INSERT INTO alarm_state VALUES (?, ?) ON CONFLICT (key) DO UPDATE SET json = excluded.json',
  forgetAlarm: 'DELETE FROM alarm_state WHERE key = ?',
  alarms: 'SELECT key, json FROM alarm_state ORDER BY key',
  putBaseline: 'INSERT INTO baselines VALUES (?, ?) ON CONFLICT (key) DO UPDATE SET json = excluded.json',
  forgetBaseline: 'DELETE FROM baselines WHERE key = ?',
  baselines: 'SELECT key, json FROM baselines ORDER BY key',
  addJournal:
    'INSERT INTO journal (n, kind, key, t, json, made_s) VALUES (?, ?, ?, ?, ?, ?) ON CONFLICT (n) DO NOTHING',
  // The newest that match; the caller turns them round.
  journal: `SELECT n, kind, key, t, json FROM journal
    WHERE n > :after AND t >= :since AND (:kind IS NULL OR kind = :kind) AND (:key IS NULL OR key = :key)
    ORDER BY n DESC LIMIT :limit`,
  journalFrom: `SELECT n, kind, key, t, json FROM journal
    WHERE n > :after AND t >= :since AND (:kind IS NULL OR kind = :kind) AND (:key IS NULL OR key = :key)
    ORDER BY n LIMIT :limit`,
  expireJournal: `DELETE FROM journal WHERE made_s < ? AND n < (SELECT max(n) FROM journal)`,
  dropJournal: 'DELETE FROM journal WHERE n IN (SELECT n FROM journal ORDER BY n LIMIT ?)',
  addTrend: 'INSERT INTO trend (point, watch, wall_ms, made_s, value) VALUES (?, ?, ?, ?, ?)',
  dropTrend: 'DELETE FROM trend WHERE id IN (SELECT id FROM trend ORDER BY id LIMIT ?)',
  trend: `SELECT max(wall_ms) AS wallMs, max(made_s) AS runS, avg(value) AS mean, min(value) AS min,
      max(value) AS max, count(*) AS count
    FROM trend WHERE point = :point AND watch = :watch AND wall_ms BETWEEN :from AND :to
    GROUP BY CAST((wall_ms - :from) * :spans / :width AS INTEGER) ORDER BY wallMs`,
  recentTrend: `WITH series AS (SELECT * FROM trend WHERE point = :point AND watch = :watch),
      newest AS (SELECT max(made_s) AS end FROM series)
    SELECT max(wall_ms) AS wallMs, max(made_s) AS runS, avg(value) AS mean, min(value) AS min,
      max(value) AS max, count(*) AS count
    FROM series, newest WHERE made_s > end - :last
    GROUP BY CAST((end - made_s) * :spans / :last AS INTEGER) ORDER BY runS`,
  putBudget: `INSERT INTO budget VALUES (?, ?, ?, ?)
    ON CONFLICT (day, class) DO UPDATE SET sent = excluded.sent, received = excluded.received`,
  pruneBudget: 'DELETE FROM budget WHERE day < ?',
  budget: `SELECT day, class, sent AS sentBytes, received AS receivedBytes FROM budget WHERE day = ? ORDER BY class`,
  total: 'SELECT rows, bytes FROM totals WHERE what = ?',
} as const;
