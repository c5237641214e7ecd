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
});
