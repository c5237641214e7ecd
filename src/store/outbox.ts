import type { Database, Statement } from 'better-sqlite3';
import { rowBytes } from './limits.ts';
import {
  type BatchQuery,
  givesWay,
  hungUpReason,
  type MessageClass,
  messageClasses,
  type OutboxMessage,
  type OutboxRow,
  refusedReason,
  type SetAsideRow,
  type StoreCounters,
  type StoreLimits,
  superseded,
} from './types.ts';

interface Row {
  n: number;
  class: number;
  topic: string;
  payload: Buffer;
  qos: 0 | 1;
  retain: number;
  made_s: number;
  tries: number;
}

const code = (name: MessageClass) => messageClasses.indexOf(name);
/** How many rows may give way in one step; the loop goes on until the bounds hold. */
const dropStep = 64;

/** The outbox tables. Every method runs inside the caller's transaction. */
export class Outbox {
  readonly #limits: StoreLimits;
  readonly #sql: ReturnType<typeof prepareAll>;

  constructor(db: Database, limits: StoreLimits) {
    this.#limits = limits;
    this.#sql = prepareAll(db);
  }

  add(messages: readonly OutboxMessage[], runS: number): void {
    for (const message of messages) {
      if (superseded.includes(message.class)) {
        const gone = this.#sql.supersede.run(message.topic, code(message.class), message.n).changes;
        if (gone > 0) this.#count('superseded', gone);
      }
      // A new alarm is a new try for those of its topic that are set aside: one after the other, the oldest first.
      if (message.class === 'alarm') this.#sql.releaseTopic.run(code('alarm'), message.topic);
      this.#sql.insert.run({
        n: message.n,
        class: code(message.class),
        topic: message.topic,
        payload: message.payload,
        qos: message.qos,
        retain: message.retain ? 1 : 0,
        made: runS,
        bytes: rowBytes(message),
      });
    }
  }

  batch(query: BatchQuery, runS: number): OutboxRow[] {
    const rows = this.#sql.batch.all({
      classes: JSON.stringify(query.classes.map(code)),
      busy: JSON.stringify(query.busyTopics),
      max: Math.max(0, query.max),
      answer: code('answer'),
      oldest: runS - this.#limits.answerAgeS,
    }) as Row[];
    return rows.map((row) => ({
      n: row.n,
      class: messageClasses[row.class]!,
      topic: row.topic,
      payload: row.payload,
      qos: row.qos,
      retain: row.retain === 1,
      tries: row.tries,
      ageS: runS - row.made_s,
    }));
  }

  accept(ns: readonly number[]): void {
    for (const n of ns) {
      const row = this.#sql.get.get(n) as Row | undefined;
      if (row === undefined) continue;
      if (row.retain === 1) {
        if (row.payload.length === 0) this.#sql.forget.run(row.topic);
        else this.#sql.remember.run(row.topic, row.n, row.class, row.payload, row.qos);
        this.#sql.overtake.run(row.n, row.topic);
      }
      this.#sql.delete.run(n);
    }
  }

  reject(n: number, reason: string, poison: boolean): void {
    if (!poison) {
      this.#sql.tried.run(n);
      return;
    }
    this.#sql.setAside.run(reason, n);
    // Whoever was refused one alarm must not hear of the next one first.
    if (reason.startsWith(refusedReason)) this.#sql.setTopicAside.run({ reason, n, alarm: code('alarm') });
    const surplus = this.#sql.surplusAside.all(code('alarm'), this.#limits.setAsideRows);
    this.#dropEach(surplus as { n: number; class: number }[]);
  }

  /** Alarms only: the broker's access rules may have been mended since. */
  releaseRefused(): number {
    return this.#sql.release.run(`${refusedReason}%`, code('alarm')).changes;
  }

  /** Alarms only: it may have been the link that was cut. */
  releaseHungUp(): number {
    return this.#sql.release.run(`${hungUpReason}%`, code('alarm')).changes;
  }

  resendRetained(runS: number): number {
    return this.#sql.resend.run(runS).changes;
  }

  retainedTopics(): { topic: string; class: MessageClass }[] {
    const rows = this.#sql.retainedTopics.all() as { topic: string; class: number }[];
    return rows.map((row) => ({ topic: row.topic, class: messageClasses[row.class]! }));
  }

  /** Lets rows give way until the bounds hold: stale answers, then class by class, the oldest first, never alarms. */
  bound(runS: number): void {
    this.#dropEach(
      this.#sql.staleAnswers.all(code('answer'), runS - this.#limits.answerAgeS) as {
        n: number;
        class: number;
      }[],
    );
    for (const name of givesWay) {
      for (;;) {
        const total = this.#total('outbox');
        const surplusRows = total.rows - this.#limits.outboxRows;
        const surplusBytes = total.bytes - this.#limits.outboxBytes;
        if (surplusRows <= 0 && surplusBytes <= 0) return;
        const oldest = this.#sql.oldestOf.all(code(name), dropStep) as {
          n: number;
          class: number;
          bytes: number;
        }[];
        if (oldest.length === 0) break;
        let rows = 0;
        let bytes = 0;
        const going = oldest.filter((row) => {
          if (rows >= surplusRows && bytes >= surplusBytes) return false;
          rows++;
          bytes += row.bytes;
          return true;
        });
        this.#dropEach(going);
      }
    }
  }

  counters(runS: number): Pick<StoreCounters, 'outbox' | 'setAside' | 'dropped' | 'superseded'> {
    const zero = () =>
      Object.fromEntries(messageClasses.map((name) => [name, 0])) as Record<MessageClass, number>;
    const byClass = zero();
    for (const row of this.#sql.byClass.all() as { class: number; rows: number }[]) {
      byClass[messageClasses[row.class]!] = row.rows;
    }
    const dropped = zero();
    let supersededRows = 0;
    for (const row of this.#sql.dropped.all() as { what: string; rows: number }[]) {
      if (row.what === 'superseded') supersededRows = row.rows;
      else dropped[row.what as MessageClass] = row.rows;
    }
    const oldest = this.#sql.oldest.get() as { made_s: number } | undefined;
    return {
      outbox: {
        ...this.#total('outbox'),
        oldestS: oldest === undefined ? null : runS - oldest.made_s,
        byClass,
      },
      setAside: {
        rows: this.#total('aside').rows,
        latest: (this.#sql.latestAside.get() as SetAsideRow | undefined) ?? null,
      },
      dropped,
      superseded: supersededRows,
    };
  }

  #dropEach(rows: readonly { n: number; class: number }[]): void {
    for (const row of rows) {
      this.#sql.delete.run(row.n);
      this.#count(messageClasses[row.class]!, 1);
    }
  }

  #count(what: string, rows: number): void {
    this.#sql.count.run(what, rows);
  }

  #total(what: 'outbox' | 'aside'): { rows: number; bytes: number } {
    return this.#sql.total.get(what) as { rows: number; bytes: number };
  }
}

function prepareAll(db: Database): Record<OutboxStatement, Statement> {
  return Object.fromEntries(
    Object.entries(statements).map(([name, sql]) => [name, db.prepare(sql)]),
  ) as unknown as Record<OutboxStatement, Statement>;
}

type OutboxStatement = keyof typeof statements;

const statements = {
  // A commit whose outcome was unknown (the worker died) may be repeated.
  insert: `INSERT INTO outbox (n, class, topic, payload, qos, retain, made_s, bytes)
    VALUES (:n, :class, :topic, :payload, :qos, :retain, :made, :bytes) ON CONFLICT (n) DO NOTHING`,
  supersede: 'DELETE FROM outbox WHERE topic = ? AND class = ? AND n < ? AND aside IS NULL',
  // The oldest of each topic, whatever its class: an order that a class may not overturn.
  batch: `SELECT n, class, topic, payload, qos, retain, made_s, tries FROM outbox AS o
    WHERE aside IS NULL AND class IN (SELECT value FROM json_each(:classes))
      AND topic NOT IN (SELECT value FROM json_each(:busy))
      AND NOT (class = :answer AND made_s < :oldest)
      AND n = (SELECT min(n) FROM outbox AS i WHERE i.topic = o.topic AND i.aside IS NULL)
    ORDER BY class, n LIMIT :max`,
  get: 'SELECT n, class, topic, payload, qos, retain FROM outbox WHERE n = ?',
  delete: 'DELETE FROM outbox WHERE n = ?',
  remember: `INSERT INTO retained (topic, n, class, payload, qos) VALUES (?, ?, ?, ?, ?)
    ON CONFLICT (topic) DO UPDATE SET n = excluded.n, class = excluded.class, payload = excluded.payload,
      qos = excluded.qos WHERE excluded.n >= retained.n`,
  forget: 'DELETE FROM retained WHERE topic = ?',
  tried: 'UPDATE outbox SET tries = tries + 1 WHERE n = ?',
  setAside: 'UPDATE outbox SET aside = ?, tries = tries + 1 WHERE n = ? AND aside IS NULL',
  setTopicAside: `UPDATE outbox SET aside = :reason WHERE aside IS NULL AND class = :alarm
    AND topic = (SELECT topic FROM outbox WHERE n = :n AND class = :alarm)`,
  releaseTopic: `UPDATE outbox SET aside = NULL
    WHERE (aside LIKE '${refusedReason}%' OR aside LIKE '${hungUpReason}%') AND class = ? AND topic = ?`,
  release: 'UPDATE outbox SET aside = NULL WHERE aside LIKE ? AND class = ?',
  // Without the hint every row that waits with a lower number would be looked at.
  overtake: `UPDATE outbox INDEXED BY outbox_aside SET retain = 0
    WHERE aside IS NOT NULL AND n < ? AND topic = ?`,
  resend: `INSERT INTO outbox (n, class, topic, payload, qos, retain, made_s, bytes)
    SELECT n, class, topic, payload, qos, 1, ?, length(topic) + length(payload) + 64 FROM retained AS r
    WHERE NOT EXISTS (SELECT 1 FROM outbox AS o WHERE o.topic = r.topic AND o.retain = 1 AND o.aside IS NULL)
      AND NOT EXISTS (SELECT 1 FROM outbox AS o WHERE o.n = r.n)`,
  retainedTopics: `SELECT topic, min(class) AS class FROM (
      SELECT topic, class FROM retained
      UNION ALL SELECT topic, class FROM outbox WHERE retain = 1 AND aside IS NULL
    ) GROUP BY topic ORDER BY topic`,
  staleAnswers: 'SELECT n, class FROM outbox WHERE aside IS NULL AND class = ? AND made_s < ?',
  oldestOf: 'SELECT n, class, bytes FROM outbox WHERE aside IS NULL AND class = ? ORDER BY n LIMIT ?',
  surplusAside: `SELECT n, class FROM outbox WHERE aside IS NOT NULL AND class <> ?
    ORDER BY n DESC LIMIT -1 OFFSET ?`,
  latestAside: 'SELECT n, topic, aside AS reason FROM outbox WHERE aside IS NOT NULL ORDER BY n DESC LIMIT 1',
  byClass: 'SELECT class, count(*) AS rows FROM outbox WHERE aside IS NULL GROUP BY class',
  oldest: 'SELECT made_s FROM outbox WHERE aside IS NULL ORDER BY n LIMIT 1',
  dropped: 'SELECT what, rows FROM dropped',
  count: `INSERT INTO dropped VALUES (?, ?) ON CONFLICT (what) DO UPDATE SET rows = rows + excluded.rows`,
  total: 'SELECT rows, bytes FROM totals WHERE what = ?',
} as const;
