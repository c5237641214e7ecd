import { afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import { ForebayError } from '../../src/config/errors.ts';
import { Log } from '../../src/station/log.ts';
import { StoreWatch } from '../../src/station/store-watch.ts';

describe('a database that takes nothing', () => {
  beforeEach(() => void vi.useFakeTimers());
  afterEach(() => void vi.useRealTimers());

  function made() {
    const told: (string | null)[] = [];
    const watch = new StoreWatch({
      store: { open: () => Promise.reject(new Error('not here')) },
      log: new Log(() => 0, { write: () => undefined }),
      monotonicS: () => 0,
      disk: (trouble) => told.push(trouble),
      storage: (says) => told.push(says),
      fatal: (error) => told.push(`fatal: ${error.message}`),
    });
    return { told, watch };
  }

  it('is told once, as failing when it has lasted ten seconds, and once when it is over', () => {
    const { told, watch } = made();
    watch.failed(new ForebayError('store.full', 'no room'));
    vi.advanceTimersByTime(9_900);
    watch.failed(new ForebayError('store.full', 'no room'));
    expect(told).toEqual(['no room']);
    expect(watch.says).toBe('ok');
    vi.advanceTimersByTime(200);
    expect(told).toEqual(['no room', 'failing']);
    expect(watch.says).toBe('failing');
    watch.works();
    watch.works();
    vi.advanceTimersByTime(60_000);
    expect(told).toEqual(['no room', 'failing', 'ok', null]);
  });

  it('is opened anew without running back in time', async () => {
    vi.useRealTimers();
    const opened: number[] = [];
    let nowS = 10;
    const watch = new StoreWatch({
      store: {
        open: async (leastRunS = 0) => {
          opened.push(leastRunS);
          // The last commit was long ago.
          return { storeId: 'abcdef', nextN: 1, runS: Math.max(400, leastRunS) };
        },
      },
      log: new Log(() => 0, { write: () => undefined }),
      monotonicS: () => nowS,
      disk: () => undefined,
      storage: () => undefined,
      fatal: () => undefined,
    });
    await watch.open(500);
    nowS = 70;
    await watch.reopen(new Error('killed'));
    expect(opened).toEqual([500, 560]);
    expect(watch.runS).toBe(560);
  });

  it('is no news to SCADA when it was a hiccup', () => {
    const { told, watch } = made();
    watch.failed(new Error('busy'));
    vi.advanceTimersByTime(5000);
    watch.works();
    vi.advanceTimersByTime(60_000);
    expect(told).toEqual(['busy', null]);
  });

  it('is the end of the agent when it is broken', () => {
    const { told, watch } = made();
    watch.failed(new ForebayError('store.broken', 'malformed'));
    expect(told[0]).toBe('fatal: malformed');
  });
});
