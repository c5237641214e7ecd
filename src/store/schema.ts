import type { Database } from 'better-sqlite3';

/**
 * The database's layout, one step a version (`PRAGMA user_version`). A step that has shipped never changes.
 * `totals` is kept by triggers, so that bounds are checked without counting rows and roll back with what they count.
 */
const steps: readonly string[] = [
  `
  CREATE TABLE meta (key TEXT PRIMARY KEY, value NOT NULL) WITHOUT ROWID;

  CREATE TABLE outbox (
    n INTEGER PRIMARY KEY,
    class INTEGER NOT NULL,
    topic TEXT NOT NULL,
    payload BLOB NOT NULL,
    qos INTEGER NOT NULL,
    retain INTEGER NOT NULL,
    made_s REAL NOT NULL,
    bytes INTEGER NOT NULL,
    tries INTEGER NOT NULL DEFAULT 0,
    aside TEXT
  );
  CREATE INDEX outbox_class ON outbox (class, n) WHERE aside IS NULL;
  CREATE INDEX outbox_topic ON outbox (topic, n) WHERE aside IS NULL;
  CREATE INDEX outbox_aside ON outbox (n) WHERE aside IS NOT NULL;

  CREATE TABLE journal (
    n INTEGER PRIMARY KEY,
    kind TEXT NOT NULL,
    key TEXT NOT NULL,
    t TEXT NOT NULL,
    json TEXT NOT NULL,
    made_s REAL NOT NULL
  );

  CREATE TABLE alarm_state (key TEXT PRIMARY KEY, json TEXT NOT NULL) WITHOUT ROWID;
  CREATE TABLE baselines (key TEXT PRIMARY KEY, json TEXT NOT NULL) WITHOUT ROWID;

  CREATE TABLE trend (
    id INTEGER PRIMARY KEY,
    point TEXT NOT NULL,
    watch TEXT NOT NULL,
    wall_ms INTEGER NOT NULL,
    made_s REAL NOT NULL,
    value REAL NOT NULL
  );
  CREATE INDEX trend_series ON trend (point, watch, wall_ms);

  CREATE TABLE budget (
    day INTEGER NOT NULL,
    class TEXT NOT NULL,
    sent INTEGER NOT NULL,
    received INTEGER NOT NULL,
    PRIMARY KEY (day, class)
  ) WITHOUT ROWID;

  CREATE TABLE retained (
    topic TEXT PRIMARY KEY,
    n INTEGER NOT NULL,
    class INTEGER NOT NULL,
    payload BLOB NOT NULL,
    qos INTEGER NOT NULL
  ) WITHOUT ROWID;

  CREATE TABLE dropped (what TEXT PRIMARY KEY, rows INTEGER NOT NULL) WITHOUT ROWID;

  CREATE TABLE totals (what TEXT PRIMARY KEY, rows INTEGER NOT NULL, bytes INTEGER NOT NULL) WITHOUT ROWID;
  INSERT INTO totals VALUES ('outbox', 0, 0), ('aside', 0, 0), ('journal', 0, 0), ('trend', 0, 0);
  CREATE TRIGGER outbox_added AFTER INSERT ON outbox BEGIN
    UPDATE totals SET rows = rows + 1, bytes = bytes + NEW.bytes WHERE what = 'outbox';
  END;
  CREATE TRIGGER outbox_gone AFTER DELETE ON outbox BEGIN
    UPDATE totals SET rows = rows - 1, bytes = bytes - OLD.bytes
      WHERE what = CASE WHEN OLD.aside IS NULL THEN 'outbox' ELSE 'aside' END;
  END;
  CREATE TRIGGER outbox_moved AFTER UPDATE OF aside ON outbox WHEN (OLD.aside IS NULL) <> (NEW.aside IS NULL) BEGIN
    UPDATE totals SET rows = rows - 1, bytes = bytes - OLD.bytes
      WHERE what = CASE WHEN OLD.aside IS NULL THEN 'outbox' ELSE 'aside' END;
    UPDATE totals SET rows = rows + 1, bytes = bytes + NEW.bytes
      WHERE what = CASE WHEN NEW.aside IS NULL THEN 'outbox' ELSE 'aside' END;
  END;
  CREATE TRIGGER journal_added AFTER INSERT ON journal BEGIN
    UPDATE totals SET rows = rows + 1, bytes = bytes + length(NEW.json) + length(NEW.key) WHERE what = 'journal';
  END;
  CREATE TRIGGER journal_gone AFTER DELETE ON journal BEGIN
    UPDATE totals SET rows = rows - 1, bytes = bytes - length(OLD.json) - length(OLD.key) WHERE what = 'journal';
  END;
  CREATE TRIGGER trend_added AFTER INSERT ON trend BEGIN
    UPDATE totals SET rows = rows + 1 WHERE what = 'trend';
  END;
  CREATE TRIGGER trend_gone AFTER DELETE ON trend BEGIN
    UPDATE totals SET rows = rows - 1 WHERE what = 'trend';
  END;
  `,
];

export const schemaVersion = steps.length;

/** Brings a database of an earlier version, or an empty one, to the present layout, one transaction a step. */
export function migrate(db: Database, storeId: () => string): void {
  const version = db.pragma('user_version', { simple: true }) as number;
  for (let step = version; step < steps.length; step++) {
    db.transaction(() => {
      db.exec(steps[step]!);
      if (step === 0) {
        const put = db.prepare('INSERT INTO meta VALUES (?, ?)');
        put.run('store', storeId());
        put.run('next_n', 1);
        put.run('run_s', 0);
      }
      db.pragma(`user_version = ${step + 1}`);
    })();
  }
}
