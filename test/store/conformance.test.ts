// One suite over the store in memory, in SQLite, and in SQLite behind its worker.
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { Database } from '../../src/store/database.ts';
import { localStore } from '../../src/store/local-store.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import type { Store, StoreLimits } from '../../src/store/types.ts';
import { WorkerStore } from '../../src/store/worker-store.ts';
import { every, makeFolder, message, removeFolders, roomyLimits, storeWorkerUrl } from '../support/store.ts';

let nowS = 0;
const kinds: Record<string, { make: (limits: StoreLimits) => Store; clock: boolean }> = {
  'in memory': { make: (limits) => localStore(new MemoryStore(limits, () => nowS)), clock: true },
  'in SQLite': {
    make: (limits) =>
      localStore(new Database({ directory: makeFolder(), maxMb: 64, limits, monotonicS: () => nowS })),
    clock: true,
  },
  'behind the worker': {
    make: (limits) =>
      new WorkerStore({ directory: makeFolder(), maxMb: 64, limits, workerUrl: storeWorkerUrl }),
    clock: false,
  },
};

const texts = (rows: readonly { payload: Uint8Array }[]) =>
  rows.map((row) => Buffer.from(row.payload).toString());
const numbers = (rows: readonly { n: number }[]) => rows.map((row) => row.n);

for (const [kind, { make, clock }] of Object.entries(kinds)) {
  describe(`a store ${kind}`, () => {
    let store: Store;
    const open = async (limits: Partial<StoreLimits> = {}) => {
      store = make({ ...roomyLimits, ...limits });
      return await store.open();
    };
    beforeEach(() => {
      nowS = 0;
    });
    afterEach(async () => {
      await store.close();
      removeFolders();
    });

    it('has an identity and counts from 1', async () => {
      const report = await open();
      expect(report.storeId).toMatch(/^[a-z0-9]{4,}$/);
      expect(report.nextN).toBe(1);
      expect(report.setAside).toBeUndefined();
    });

    it('gives out what was committed, byte for byte, until it is accepted', async () => {
      await open();
      const binary = Buffer.from([0, 255, 128, 10]);
      await store.commit({ outbox: [{ ...message(1), payload: binary, retain: true, qos: 1 }] });
      const [row] = await store.batch(every);
      expect(row).toMatchObject({ n: 1, class: 'alarm', qos: 1, retain: true, tries: 0 });
      expect([...row!.payload]).toEqual([...binary]);
      expect(numbers(await store.batch(every))).toEqual([1]);
      await store.accept([1]);
      expect(await store.batch(every)).toEqual([]);
    });

    it('gives alarms first, then by class, then by number', async () => {
      await open();
      await store.commit({
        outbox: [
          message(1, { class: 'reading' }),
          message(2, { class: 'health' }),
          message(3, { class: 'finding' }),
          message(4, { class: 'state' }),
          message(5, { class: 'answer' }),
          message(6),
          message(7),
          message(8, { class: 'trend' }),
        ],
      });
      expect(numbers(await store.batch(every))).toEqual([6, 7, 5, 4, 3, 2, 1, 8]);
      expect(numbers(await store.batch({ ...every, max: 2 }))).toEqual([6, 7]);
      expect(await store.batch({ ...every, max: 0 })).toEqual([]);
      expect(numbers(await store.batch({ ...every, classes: ['alarm', 'reading'] }))).toEqual([6, 7, 1]);
    });

    it('gives one message a topic, the oldest, and none of a busy topic', async () => {
      await open();
      await store.commit({
        outbox: [message(1, { topic: 'a' }), message(2, { topic: 'a' }), message(3, { topic: 'b' })],
      });
      expect(numbers(await store.batch(every))).toEqual([1, 3]);
      expect(numbers(await store.batch({ ...every, busyTopics: ['a'] }))).toEqual([3]);
      await store.accept([1]);
      expect(numbers(await store.batch(every))).toEqual([2, 3]);
    });

    it('keeps the order of a topic even across classes', async () => {
      await open();
      await store.commit({
        outbox: [message(1, { topic: 'a', class: 'reading' }), message(2, { topic: 'a', class: 'alarm' })],
      });
      expect(numbers(await store.batch(every))).toEqual([1]);
    });

    it('lets a newer state or health stand for an unsent older one, never an alarm, a finding or a reading', async () => {
      await open();
      for (const name of ['state', 'health', 'alarm', 'finding', 'reading'] as const) {
        const base = { state: 10, health: 20, alarm: 30, finding: 40, reading: 50 }[name];
        await store.commit({ outbox: [message(base, { topic: name, class: name, retain: true })] });
        await store.commit({ outbox: [message(base + 1, { topic: name, class: name, retain: true })] });
      }
      expect(numbers(await store.batch(every))).toEqual([30, 11, 40, 21, 50]);
      expect((await store.counters()).superseded).toBe(2);
      expect((await store.counters()).outbox.rows).toBe(8);
    });

    it('accepts a message that was superseded while in flight without touching the newer one', async () => {
      await open();
      await store.commit({ outbox: [message(1, { topic: 's', class: 'state', retain: true, text: 'old' })] });
      await store.commit({ outbox: [message(2, { topic: 's', class: 'state', retain: true, text: 'new' })] });
      await store.accept([1, 1, 99]);
      expect(texts(await store.batch(every))).toEqual(['new']);
    });

    it('counts tries and sets poison aside where it can be seen', async () => {
      await open();
      await store.commit({ outbox: [message(1), message(2)] });
      await store.reject(1, 'connection lost', { poison: false });
      expect((await store.batch(every))[0]).toMatchObject({ n: 1, tries: 1 });
      await store.reject(1, 'too large for the broker', { poison: true });
      expect(numbers(await store.batch(every))).toEqual([2]);
      const { setAside, outbox } = await store.counters();
      expect(setAside).toEqual({
        rows: 1,
        latest: { n: 1, topic: message(1).topic, reason: 'too large for the broker' },
      });
      expect(outbox.rows).toBe(1);
    });

    it('gives refused alarms another chance, and nothing else', async () => {
      await open();
      await store.commit({ outbox: [message(1), message(2), message(3, { class: 'reading' })] });
      await store.reject(1, 'refused by the broker: 135', { poison: true });
      await store.reject(2, 'too large', { poison: true });
      await store.reject(3, 'refused by the broker: 135', { poison: true });
      expect(await store.releaseRefused()).toBe(1);
      expect(numbers(await store.batch(every))).toEqual([1]);
      expect((await store.counters()).setAside.rows).toBe(2);
    });

    it('never lets a later alarm of a topic pass one that was refused', async () => {
      await open();
      const on = (n: number, topic: string) => message(n, { topic });
      await store.commit({ outbox: [on(1, 'a'), on(2, 'a'), on(3, 'b')] });
      await store.reject(1, 'refused by the broker: 135', { poison: true });
      expect(numbers(await store.batch(every))).toEqual([3]);
      expect((await store.counters()).setAside.rows).toBe(2);
      // The next one is a new try for all of them, in their order.
      await store.commit({ outbox: [on(4, 'a')] });
      expect(numbers(await store.batch(every))).toEqual([1, 3]);
      await store.accept([1]);
      expect(numbers(await store.batch(every))).toEqual([2, 3]);
      await store.reject(2, 'refused by the broker: 135', { poison: true });
      expect(numbers(await store.batch(every))).toEqual([3]);
      expect(await store.releaseRefused()).toBe(2);
      expect(numbers(await store.batch(every))).toEqual([2, 3]);
    });

    it('gives alarms over which the broker hung up another chance, with the tries they had, and nothing else', async () => {
      await open();
      await store.commit({ outbox: [message(1), message(2), message(3, { class: 'reading' })] });
      for (const n of [1, 3]) await store.reject(n, 'the broker hung up 8 times over it', { poison: true });
      await store.reject(2, 'refused by the broker: 135', { poison: true });
      expect(await store.releaseHungUp()).toBe(1);
      expect(await store.batch(every)).toMatchObject([{ n: 1, tries: 1 }]);
      expect(await store.releaseHungUp()).toBe(0);
    });

    it('tries an alarm over which the broker hung up ahead of a new one of its topic, and holds none back for it', async () => {
      await open();
      const on = (n: number) => message(n, { topic: 'a' });
      await store.commit({ outbox: [on(1), on(2)] });
      await store.reject(1, 'the broker hung up 8 times over it', { poison: true });
      expect(numbers(await store.batch(every))).toEqual([2]);
      await store.commit({ outbox: [on(3)] });
      expect(numbers(await store.batch(every))).toEqual([1]);
    });

    it('does not put what was set aside back in the place of a later state that arrived', async () => {
      await open();
      const on = (n: number, topic: string, text?: string) =>
        message(n, { topic, retain: true, ...(text === undefined ? {} : { text }) });
      await store.commit({ outbox: [on(1, 'a'), on(2, 'b'), on(3, 'c')] });
      for (const n of [1, 2, 3]) await store.reject(n, 'the broker hung up', { poison: true });
      await store.commit({ outbox: [on(4, 'a'), on(5, 'b', '')] });
      for (const n of [1, 2]) await store.reject(n, 'the broker hung up', { poison: true });
      await store.accept([4, 5]);
      expect(await store.releaseHungUp()).toBe(3);
      const rows = await store.batch(every);
      expect(rows.map(({ n, retain }) => [n, retain])).toEqual([
        [1, false],
        [2, false],
        [3, true],
      ]);
      await store.accept([1, 2, 3]);
      expect((await store.retainedTopics()).map(({ topic }) => topic)).toEqual(['a', 'c']);
    });

    it('never drops an alarm that is set aside', async () => {
      await open({ setAsideRows: 2 });
      const readings = [5, 6, 7].map((n) => message(n, { class: 'reading' }));
      await store.commit({ outbox: [message(1), message(2), message(3), message(4), ...readings] });
      for (let n = 1; n <= 7; n++) await store.reject(n, 'refused by the broker: 135', { poison: true });
      const { setAside, dropped } = await store.counters();
      expect(setAside.rows).toBe(6);
      expect(dropped).toMatchObject({ alarm: 0, reading: 1 });
      expect(await store.releaseRefused()).toBe(4);
    });

    it('keeps so many set-aside rows and counts the older ones as dropped', async () => {
      await open({ setAsideRows: 2 });
      await store.commit({ outbox: [1, 2, 3, 4].map((n) => message(n, { class: 'reading' })) });
      for (const n of [1, 2, 3]) await store.reject(n, 'too large', { poison: true });
      expect((await store.counters()).setAside.rows).toBe(2);
      expect((await store.counters()).dropped.reading).toBe(1);
    });

    it('remembers what was retained, sends it again, and forgets an emptied topic', async () => {
      await open();
      await store.commit({
        outbox: [
          message(1, { topic: 'r', class: 'reading', retain: true, text: 'one' }),
          message(2, { topic: 's', class: 'state', retain: true, text: 'two' }),
          message(3, { topic: 'x', class: 'answer', text: 'not retained' }),
        ],
      });
      await store.accept([1, 2, 3]);
      expect(await store.retainedTopics()).toEqual([
        { topic: 'r', class: 'reading' },
        { topic: 's', class: 'state' },
      ]);
      await store.commit({
        outbox: [message(4, { topic: 's', class: 'state', retain: true, text: 'newer' })],
      });
      expect(await store.resendRetained()).toBe(1);
      expect(await store.resendRetained()).toBe(0);
      const rows = await store.batch(every);
      expect(rows.map((row) => [row.n, row.topic, row.retain])).toEqual([
        [4, 's', true],
        [1, 'r', true],
      ]);
      expect(texts(rows)).toEqual(['newer', 'one']);
      await store.accept([1, 4]);
      await store.commit({ outbox: [message(5, { topic: 'r', class: 'state', retain: true, text: '' })] });
      await store.accept([5]);
      expect(await store.retainedTopics()).toEqual([{ topic: 's', class: 'state' }]);
    });

    it('drops readings, then trend, health, findings, answers and states when it is full, oldest first, alarms never', async () => {
      await open({ outboxRows: 4 });
      await store.commit({
        outbox: [
          message(1, { class: 'state' }),
          message(2, { class: 'answer' }),
          message(3, { class: 'finding' }),
          message(4, { class: 'reading' }),
          message(5, { class: 'reading' }),
          message(6, { class: 'trend' }),
        ],
      });
      expect(numbers(await store.batch(every))).toEqual([2, 1, 3, 6]);
      await store.commit({ outbox: [message(7), message(8), message(9), message(10), message(11)] });
      expect(numbers(await store.batch(every))).toEqual([7, 8, 9, 10, 11]);
      const { dropped, outbox } = await store.counters();
      expect(dropped).toMatchObject({ reading: 2, trend: 1, finding: 1, answer: 1, state: 1, alarm: 0 });
      expect(outbox.byClass).toMatchObject({ alarm: 5, reading: 0 });
    });

    it('bounds the outbox by bytes too', async () => {
      await open({ outboxBytes: 5000 });
      const text = 'x'.repeat(1000);
      await Promise.all(
        Array.from({ length: 20 }, (_, i) =>
          store.commit({ outbox: [message(i + 1, { class: 'reading', text })] }),
        ),
      );
      const { outbox, dropped } = await store.counters();
      expect(outbox.bytes).toBeLessThanOrEqual(5000);
      expect(outbox.rows).toBe(4);
      expect(dropped.reading).toBe(16);
      expect(numbers(await store.batch(every))).toEqual([17, 18, 19, 20]);
    });

    it('keeps alarm states, baselines and budget by key', async () => {
      await open();
      await store.commit({
        alarmStates: [
          { key: 'b', json: '{"v":1}' },
          { key: 'a', json: '{"v":2}' },
        ],
        baselines: [{ key: 'p', json: '[1]' }],
        budget: [{ day: 3, class: 'alarm', sentBytes: 10, receivedBytes: 2 }],
      });
      await store.commit({
        alarmStates: [
          { key: 'b', json: null },
          { key: 'a', json: '{"v":3}' },
        ],
        baselines: [{ key: 'p', json: '[2]' }],
        budget: [{ day: 3, class: 'alarm', sentBytes: 30, receivedBytes: 4 }],
      });
      expect(await store.alarmStates()).toEqual({ a: '{"v":3}' });
      expect(await store.baselines()).toEqual({ p: '[2]' });
      expect(await store.budget(3)).toEqual([{ day: 3, class: 'alarm', sentBytes: 30, receivedBytes: 4 }]);
      expect(await store.budget(4)).toEqual([]);
    });

    it('keeps the journal in order, bounded, and answers by number, time, kind and key', async () => {
      await open({ journalRows: 4 });
      const entry = (n: number, changes = {}) => ({
        n,
        kind: 'alarm',
        key: 'pump-1/de.zone',
        t: `2026-01-01T00:00:0${n}.000Z`,
        json: `{"n":${n}}`,
        ...changes,
      });
      await store.commit({ journal: [entry(1), entry(2), entry(3)] });
      await store.commit({ journal: [entry(4, { kind: 'note', key: 'pump-1' }), entry(5), entry(6)] });
      expect(numbers(await store.journal({ limit: 100 }))).toEqual([3, 4, 5, 6]);
      expect(numbers(await store.journal({ limit: 2 }))).toEqual([5, 6]);
      expect(numbers(await store.journal({ limit: 100, afterN: 4 }))).toEqual([5, 6]);
      expect(numbers(await store.journal({ limit: 100, sinceT: '2026-01-01T00:00:05.000Z' }))).toEqual([
        5, 6,
      ]);
      expect(await store.journal({ limit: 100, kind: 'note' })).toEqual([
        entry(4, { kind: 'note', key: 'pump-1' }),
      ]);
      expect(numbers(await store.journal({ limit: 100, key: 'pump-1' }))).toEqual([4]);
      expect(await store.journal({ limit: 0 })).toEqual([]);
    });

    it('bounds the journal by bytes', async () => {
      await open({ journalBytes: 1000 });
      for (let n = 1; n <= 40; n++) {
        await store.commit({ journal: [{ n, kind: 'alarm', key: 'k', t: '2026', json: 'x'.repeat(99) }] });
      }
      const { journal } = await store.counters();
      expect(journal.bytes).toBeLessThanOrEqual(1000);
      expect(journal.rows).toBe(10);
      expect((await store.journal({ limit: 99 })).at(-1)!.n).toBe(40);
    });

    it('thins a trend to the points asked for, with mean, least and greatest', async () => {
      await open();
      const values = [1, 2, 3, 10, 20, 60].map((value, i) => ({
        point: 'p',
        watch: 'w',
        wallMs: i * 1000,
        value,
      }));
      await store.commit({ trend: [...values, { point: 'q', watch: 'w', wallMs: 0, value: 99 }] });
      const points = await store.trend({ point: 'p', watch: 'w', fromMs: 0, toMs: 5999, points: 2 });
      expect(points.map(({ wallMs, mean, min, max, count }) => ({ wallMs, mean, min, max, count }))).toEqual([
        { wallMs: 2000, mean: 2, min: 1, max: 3, count: 3 },
        { wallMs: 5000, mean: 30, min: 10, max: 60, count: 3 },
      ]);
      const all = await store.trend({ point: 'p', watch: 'w', fromMs: 2000, toMs: 3000, points: 100 });
      expect(all.map((point) => point.mean)).toEqual([3, 10]);
    });

    it('keeps the oldest of a journal where that is asked for', async () => {
      await open();
      const journal = [1, 2, 3, 4, 5].map((n) => ({ n, kind: 'note', key: 'k', t: `t${n}`, json: '{}' }));
      await store.commit({ journal });
      expect(numbers(await store.journal({ afterN: 1, limit: 2 }))).toEqual([4, 5]);
      expect(numbers(await store.journal({ afterN: 1, limit: 2, keep: 'oldest' }))).toEqual([2, 3]);
      expect(numbers(await store.journal({ sinceT: 't3', limit: 2, keep: 'oldest' }))).toEqual([3, 4]);
    });

    it('bounds the trend, the oldest first', async () => {
      await open({ trendRows: 3 });
      const trend = [1, 2, 3, 4, 5].map((value) => ({ point: 'p', watch: 'w', wallMs: value, value }));
      await store.commit({ trend });
      expect(
        (await store.trend({ point: 'p', watch: 'w', fromMs: 0, toMs: 99, points: 99 })).map((v) => v.mean),
      ).toEqual([3, 4, 5]);
      expect((await store.counters()).trendRows).toBe(3);
    });

    it('takes a commit again whose outcome was unknown', async () => {
      await open();
      const commit = {
        outbox: [message(1)],
        journal: [{ n: 1, kind: 'alarm', key: 'k', t: '2026', json: '{}' }],
      };
      await store.commit(commit);
      await store.commit(commit);
      expect((await store.counters()).outbox.rows).toBe(1);
      expect(numbers(await store.journal({ limit: 9 }))).toEqual([1]);
    });

    if (clock) {
      it('gives the end of a series by run time, whatever its labels say', async () => {
        await open();
        for (const [atS, wallMs, value] of [
          [0, 9e12, 1],
          [3600, 0, 2],
          [7200, 1, 4],
          [7300, 2, 8],
        ] as const) {
          nowS = atS;
          const watch = 'w';
          await store.commit({
            trend: [
              { point: 'p', watch, wallMs, value },
              { point: 'q', watch, wallMs, value: 99 },
            ],
          });
        }
        // The clock goes on while nothing is measured: the series ends with its newest value.
        nowS = 1e6;
        const all = await store.recentTrend({ point: 'p', watch: 'w', lastS: 1e5, points: 1000 });
        expect(all.map(({ runS, mean }) => [runS, mean])).toEqual([
          [0, 1],
          [3600, 2],
          [7200, 4],
          [7300, 8],
        ]);
        const last = await store.recentTrend({ point: 'p', watch: 'w', lastS: 3700, points: 2 });
        expect(last.map(({ runS, mean, count }) => [runS, mean, count])).toEqual([[7300, 6, 2]]);
        expect(await store.recentTrend({ point: 'none', watch: 'w', lastS: 1, points: 1 })).toEqual([]);
      });

      it('tells ages in run time, and lets stale answers and old journal entries go', async () => {
        await open({ answerAgeS: 600, journalAgeS: 1000 });
        await store.commit({
          outbox: [message(1), message(2, { class: 'answer' })],
          journal: [{ n: 1, kind: 'alarm', key: 'k', t: '2036', json: '{}' }],
        });
        nowS = 601;
        expect((await store.batch(every)).map((row) => [row.n, row.ageS])).toEqual([[1, 601]]);
        expect((await store.counters()).outbox.oldestS).toBe(601);
        nowS = 1001;
        await store.commit({ journal: [{ n: 3, kind: 'alarm', key: 'k', t: '1970', json: '{}' }] });
        await store.commit({});
        expect((await store.counters()).dropped.answer).toBe(1);
        expect(numbers(await store.journal({ limit: 9 }))).toEqual([3]);
      });
    }
  });
}
