import { afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import { ConnectionLoop } from '../../src/uplink/connection-loop.ts';

describe('the loop of connections', () => {
  beforeEach(() => void vi.useFakeTimers());
  afterEach(() => void vi.useRealTimers());

  function failing() {
    const attemptsMs: number[] = [];
    const loop = new ConnectionLoop(
      { protocol: 4, firstPauseMs: 1000, longestPauseMs: 120_000, steadyMs: 60_000, random: () => 1 },
      {
        connect: async () => {
          attemptsMs.push(Date.now());
          throw new Error('nobody there');
        },
        ended: () => undefined,
      },
    );
    return { loop, pausesS: () => attemptsMs.slice(1).map((at, k) => (at - attemptsMs[k]!) / 1000) };
  }

  it('waits longer after each failure, up to a limit', async () => {
    const { loop, pausesS } = failing();
    loop.start();
    await vi.advanceTimersByTimeAsync(500_000);
    expect(pausesS()).toEqual([1, 2, 4, 8, 16, 32, 64, 120, 120, 120]);
    loop.stop();
  });

  it('cuts a long pause short when the cause is gone, and makes one attempt of it', async () => {
    const { loop, pausesS } = failing();
    loop.start();
    await vi.advanceTimersByTimeAsync(63_000 + 10_000);
    loop.soon();
    loop.soon();
    await vi.advanceTimersByTimeAsync(1000 + 1000 + 2000);
    expect(pausesS()).toEqual([1, 2, 4, 8, 16, 32, 11, 1, 2]);
    loop.stop();
    loop.soon();
    await vi.advanceTimersByTimeAsync(500_000);
    expect(pausesS()).toHaveLength(9);
  });

  it('makes no second attempt beside one under way', async () => {
    let attempts = 0;
    const loop = new ConnectionLoop(
      { protocol: 4, firstPauseMs: 1000, longestPauseMs: 120_000, steadyMs: 60_000, random: () => 1 },
      {
        connect: () => {
          attempts++;
          return new Promise(() => undefined);
        },
        ended: () => undefined,
      },
    );
    loop.start();
    loop.soon();
    await vi.advanceTimersByTimeAsync(10_000);
    expect(attempts).toBe(1);
  });
});
