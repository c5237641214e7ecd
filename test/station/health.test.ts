import { describe, expect, it } from 'vitest';
import { healthBody } from '../../src/station/health.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import { roomyLimits } from '../support/store.ts';

describe('health', () => {
  it('tells what the uplink counted', () => {
    const body = healthBody({
      t: '2026-03-02T10:15:30.000Z',
      links: {},
      store: new MemoryStore(roomyLimits, () => 0).counters(),
      uplink: {
        connected: true,
        protocol: '5',
        connects: 3,
        inFlight: 0,
        asks: { done: 1, refused: 2, ignored: 4 },
        oversized: 7,
        bytesToday: [{ day: 0, class: 'alarm', sentBytes: 500, receivedBytes: 20 }],
        leftTodayBytes: 900,
      },
      measuring: {
        waiting: 0,
        missed: {},
        skipped: 0,
        worker_restarts: 0,
        readings_lost: 0,
        readings_held: 0,
        alarm_inputs_dropped: 0,
        told_unreadable: 0,
      },
      snapshots: {},
      eventLoopP99Ms: null,
      directory: '/',
      cpuPct: null,
    });
    expect(body.uplink).toEqual({
      protocol: '5',
      connects: 3,
      asks: { done: 1, refused: 2, ignored: 4 },
      oversized: 7,
      bytes_today: { alarm: { sent: 500, received: 20 } },
      left_today: 900,
    });
  });
});
