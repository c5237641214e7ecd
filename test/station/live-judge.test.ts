import { describe, expect, it, vi } from 'vitest';
import { EMPTY_STATE } from '../../src/alarm/engine.ts';
import { planAlarms } from '../../src/alarm/plan.ts';
import { Judging } from '../../src/station/judging.ts';
import { type JudgeHost, LiveJudge } from '../../src/station/live-judge.ts';
import type { Commit } from '../../src/store/types.ts';
import { makeReading, onePoint } from '../alarm/support.ts';

function bench(failures = 0) {
  let n = 1;
  const commits: Commit[] = [];
  const failed: unknown[] = [];
  const inputsFailed: unknown[] = [];
  const station = onePoint(undefined, { startDelayS: 0 });
  const plan = planAlarms(station);
  const judging = new Judging(plan, EMPTY_STATE, () => `test-${n++}`);
  const host: JudgeHost = {
    commit: async (commit) => {
      if (failures-- > 0) throw new Error('disk full');
      commits.push(commit);
    },
    topic: (name) => `forebay/x/${name}`,
    emptying: (name, topic) => ({
      n: n++,
      class: name,
      topic,
      payload: Buffer.alloc(0),
      qos: 1,
      retain: true,
    }),
    committed: () => undefined,
    evidence: () => undefined,
    snapshotOf: () => null,
    commitFailed: (error) => failed.push(error),
    inputFailed: (error) => inputsFailed.push(error),
    monotonicS: () => 0,
  };
  const [point] = station.machines.flatMap(({ points }) => points);
  const read = (overall: number, second: number) => ({
    kind: 'reading' as const,
    pointKey: point?.key ?? '',
    reading: makeReading({ mmS: overall }),
    t: new Date(second * 1000).toISOString(),
    elapsedS: second === 0 ? null : 10,
  });
  return { judge: new LiveJudge(judging, host), judging, commits, failed, inputsFailed, read };
}

const alarmsOf = (commits: readonly Commit[]) =>
  commits.flatMap(({ outbox }) => outbox ?? []).filter((row) => row.class === 'alarm');

describe('LiveJudge', () => {
  it('puts alarm, journal entry and state into one commit, in the order of the inputs', async () => {
    const { judge, commits, read } = bench();
    for (let second = 0; second <= 40; second += 10) void judge.take(read(7.5, second));
    await judge.stop();
    const [alarm] = alarmsOf(commits);
    const commit = commits.find(({ outbox }) => alarm && outbox?.includes(alarm));
    const payload = JSON.parse(String(alarm && Buffer.from(alarm.payload)));
    expect(payload).toMatchObject({ state: 'unacknowledged', level: 'danger' });
    expect(alarm?.topic).toMatch(/^forebay\/x\/[^/]+\/alarm\/[^/]+\.zone$/);
    expect(commit?.journal?.map(({ n }) => `test-${n}`)).toContain(payload.raised);
    expect(commit?.alarmStates?.some(({ key }) => key.startsWith('alarm:'))).toBe(true);
  });

  it('tries a commit again until it is durable, and announces once', async () => {
    vi.useFakeTimers();
    try {
      const { judge, commits, failed, read } = bench(3);
      const taken = [0, 10, 20, 30, 40].map((second) => judge.take(read(7.5, second)));
      await vi.advanceTimersByTimeAsync(5000);
      await Promise.all(taken);
      expect(failed).toHaveLength(3);
      expect(alarmsOf(commits)).toHaveLength(1);
    } finally {
      vi.useRealTimers();
    }
  });

  it('does not advance its state past a commit that never became durable', async () => {
    const { judge, judging, commits, read } = bench(1e9);
    const before = judging.state;
    const stopping = [0, 10, 20, 30, 40].map((second) => judge.take(read(7.5, second)));
    await judge.stop();
    await Promise.all(stopping);
    expect(commits).toEqual([]);
    expect(judging.state.alarms).toEqual(before.alarms);
  });

  it('goes on judging after an input that it cannot judge', async () => {
    const { judge, commits, inputsFailed, read } = bench();
    await judge.take({ ...read(1, 0), reading: null as never });
    expect(inputsFailed).toHaveLength(1);
    expect(judge.dropped).toBe(1);
    for (let second = 0; second <= 40; second += 10) await judge.take(read(7.5, second));
    expect(alarmsOf(commits)).toHaveLength(1);
  });

  describe('where more waits than may', () => {
    const t = '2026-03-02T10:15:30.000Z';
    const KEY = 'pump-1/de-h.zone';
    const silent = (...conditions: 'silent'[]) => ({
      kind: 'link' as const,
      link: 'node-1',
      conditions,
      detail: null,
      t,
    });

    /** Fills the queue while the database refuses its first commit, and waits until all is judged. */
    async function stalled(fill: (made: ReturnType<typeof bench>) => void) {
      vi.useFakeTimers();
      try {
        const made = bench(1);
        void made.judge.take({ kind: 'shelve', alarm: KEY, minutes: 80, by: 'ann', t });
        fill(made);
        const last = made.judge.take({ kind: 'tick', elapsedS: 0, t });
        await vi.advanceTimersByTimeAsync(1000);
        await last;
        while (made.judge.waiting > 0) await vi.advanceTimersByTimeAsync(1);
        return made;
      } finally {
        vi.useRealTimers();
      }
    }

    it('readings go, a link that has fallen silent is told all the same', async () => {
      const { judge, judging } = await stalled(({ judge, read }) => {
        void judge.take(silent('silent'));
        for (let i = 0; i < 4000; i++) void judge.take(read(1, 10 * i));
        for (let i = 0; i < 12; i++) {
          void judge.take({ kind: 'tick', elapsedS: 10, t });
          void judge.take(read(1, 40_000 + i));
        }
      });
      expect(judging.state.alarms['agent/node-1.silent']?.life.state).toBe('unacknowledged');
      // One link, 4000 readings, 24 more and the last tick, of which 3600 may wait.
      expect(judge.dropped).toBe(1 + 4000 + 24 + 1 - 3600);
    });

    it('of a link its newest word stays, and asks wait longer than words that are superseded', async () => {
      const { judge, judging } = await stalled(({ judge }) => {
        void judge.take({ kind: 'test', alarm: 'pump-1/de-h.bearing', level: 'alert', t });
        for (let i = 0; i < 4000; i++) void judge.take(i % 2 === 0 ? silent() : silent('silent'));
        void judge.take({ kind: 'gateway', condition: 'disk', holds: true, detail: null, t });
        void judge.take(silent('silent'));
      });
      expect(judging.state.alarms['pump-1/de-h.bearing']?.test).not.toBeNull();
      expect(judging.state.alarms['agent/gateway.disk']?.life.state).toBe('unacknowledged');
      expect(judging.state.alarms['agent/node-1.silent']?.condition.alert.since).not.toBeNull();
      expect(judge.dropped).toBe(1 + 4000 + 2 + 1 - 3600);
    });

    it('no time is lost, and ticks between readings that go become one: the newest readings find room', async () => {
      const { judging } = await stalled(({ judge, read }) => {
        for (let i = 0; i < 5000; i++) {
          void judge.take(read(i < 4900 ? 1 : 8, i));
          void judge.take({ kind: 'tick', elapsedS: 1, t });
        }
      });
      expect(judging.state.alarms[KEY]).toMatchObject({ shelf: null, life: { state: 'unacknowledged' } });
    });
  });
});
