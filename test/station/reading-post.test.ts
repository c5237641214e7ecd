import { expect, it } from 'vitest';
import { ReadingPost } from '../../src/station/reading-post.ts';
import { readingOf } from '../support/readings.ts';

/** A point whose zone the test names, against a clock that the test moves. */
class Rig {
  nowS = 0;
  readonly sent: { atS: number; zone: unknown }[] = [];
  readonly post = new ReadingPost({ changePct: 20, minIntervalS: 300, atLeastS: 7200 }, [], {
    commit: async ({ outbox = [] }) => {
      for (const { payload } of outbox) {
        this.sent.push({ atS: this.nowS, zone: JSON.parse(Buffer.from(payload).toString()).zone });
      }
    },
    committed: () => undefined,
    message: (pointKey, body) => ({
      n: 1,
      class: 'reading',
      topic: pointKey,
      payload: Buffer.from(JSON.stringify(body)),
      qos: 1,
      retain: true,
    }),
    monotonicS: () => this.nowS,
    lost: (error) => {
      throw error;
    },
  });

  async read(zone: 'B' | 'C'): Promise<void> {
    await this.post.take('pump-1/h', '2026-03-02T10:15:30.000Z', { ...readingOf(), zone });
  }
}

it('a zone that flaps at each reading sends at most seven in the first minute, six in any later one', async () => {
  const rig = new Rig();
  for (rig.nowS = 0; rig.nowS < 600; rig.nowS += 2) {
    await rig.read(rig.nowS % 4 === 0 ? 'B' : 'C');
    rig.post.tick();
    await Promise.resolve();
  }
  for (let from = 0; from < 540; from++) {
    const within = rig.sent.filter(({ atS }) => atS >= from && atS < from + 60);
    // The first reading is no change.
    expect(within.length).toBeLessThanOrEqual(from === 0 ? 7 : 6);
  }
  expect(rig.sent.length).toBeGreaterThan(50);
  expect(rig.post.held).toBeGreaterThan(100);
});

it('what had to wait is sent as it then stands, though no reading follows', async () => {
  const rig = new Rig();
  for (let i = 0; i < 8; i++) {
    await rig.read(i % 2 === 0 ? 'B' : 'C');
    rig.nowS++;
  }
  expect(rig.sent.at(-1)?.zone).toBe('B');
  expect(rig.sent).toHaveLength(7);
  for (; rig.nowS < 70; rig.nowS++) rig.post.tick();
  await Promise.resolve();
  expect(rig.sent).toHaveLength(8);
  expect(rig.sent.at(-1)).toMatchObject({ zone: 'C' });
});

it('what went back to where it was is not sent at all', async () => {
  const rig = new Rig();
  for (let i = 0; i < 9; i++) {
    await rig.read(i % 2 === 0 ? 'B' : 'C');
    rig.nowS++;
  }
  for (; rig.nowS < 200; rig.nowS++) rig.post.tick();
  await Promise.resolve();
  expect(rig.sent).toHaveLength(7);
  expect(rig.post.held).toBe(1);
});
