import { describe, expect, it } from 'vitest';
import { baselineFor } from '../../src/alarm/baseline.ts';
import { addSample, NO_SAMPLES } from '../../src/alarm/learn-samples.ts';
import { planAlarms } from '../../src/alarm/plan.ts';
import { Learning } from '../../src/station/learning.ts';
import { Bench, makeMachine, makePoint, makeReading, makeStation, type Shown } from '../alarm/support.ts';
import { until } from '../support/broker-rig.ts';

/** One pump with a radial and an axial point; its rows survive it, as in a database. */
class Rig {
  readonly bench = new Bench(
    makeStation([
      makeMachine('pump-1', [
        makePoint('pump-1', 'h', 'node-1'),
        makePoint('pump-1', 'a', 'node-1', { severity: null }),
      ]),
    ]),
  );
  /** What the agent goes by. */
  plan = this.bench.plan;
  readonly rows: Record<string, string> = {};
  readonly notes: (string | null)[] = [];
  failing = false;
  failures = 0;
  learning = this.open();

  open(): Learning {
    return new Learning(structuredClone(this.rows), {
      plan: () => this.plan,
      commit: async ({ baselines = [] }, note) => {
        if (this.failing) throw new Error('the disk is full');
        for (const { key, json } of baselines) {
          if (json === null) delete this.rows[key];
          else this.rows[key] = json;
        }
        if (note) this.notes.push(note.text);
      },
      failed: () => {
        this.failures++;
      },
      now: () => this.bench.t,
    });
  }

  /** Readings of both points, ten seconds apart, and the time that passes. */
  async run(n: number, shown: (i: number) => Shown): Promise<void> {
    for (let i = 0; i < n; i++) {
      const at = shown(i);
      for (const [key, extra] of [
        ['pump-1/h', {}],
        ['pump-1/a', { severity: null }],
      ] as const) {
        const reading = makeReading({ ...at, ...extra });
        this.bench.readOne(key, { ...at, ...extra }, 10);
        this.learning.take(key, reading, this.bench.state);
      }
      this.bench.tick(10);
      this.learning.tick(10);
      // Lets what a tick began be written.
      await new Promise((resolve) => setImmediate(resolve));
    }
  }

  start(hours: number) {
    return this.learning.start('pump-1', hours, 'ann', this.bench.state);
  }

  async point(id: string) {
    const { points } = await this.learning.show('pump-1');
    return points[id] as Exclude<(typeof points)[string], string>;
  }
}

describe('learning', () => {
  it('takes the median of what was good while running, and puts it in force once it is accepted', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    await rig.start(0.5);
    await rig.run(180, (i) => {
      // Stops, starts, bad readings and a knock in between move nothing.
      if (i % 20 < 5) return { mmS: 0.1, running: false };
      if (i % 20 < 7) return { mmS: 9 };
      if (i % 20 === 10) return { mmS: null, why: ['gap: 3 samples missing'] };
      return { mmS: i === 50 ? 20 : 2 + 0.001 * (i % 3) };
    });
    const { proposed, refused } = await rig.point('h');
    expect(refused).toBeNull();
    // Two readings of a start fall into its delay of 20 s; nine times seven remain but for the knock's zone.
    expect(proposed?.ranges[0]?.figures['velocity.overall']).toMatchObject({ median: 2.001 });
    expect(rig.learning.baselineOf('pump-1/h')).toBeNull();
    await rig.learning.accept('pump-1', 'ann');
    expect(baselineFor(rig.learning.baselineOf('pump-1/h')!, 'velocity.overall', 24.7)?.median).toBe(2.001);
    expect(rig.notes).toEqual(['learning a baseline for 0.5 h', 'baseline accepted of pump-1/h, pump-1/a']);
    rig.learning = rig.open();
    expect(rig.learning.baselineOf('pump-1/a')).not.toBeNull();
  });

  it('is refused to start in zone C or D, also for points without zones', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 5 }));
    await expect(rig.start(1)).rejects.toThrow('pump-1/h is in zone C');
  });

  it('proposes nothing for any point where the machine was in zone C for more than a tenth of the time', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    await rig.start(0.25);
    await rig.run(90, (i) => ({ mmS: i % 5 === 0 ? 5 : 2 }));
    for (const id of ['h', 'a'])
      expect((await rig.point(id)).refused).toMatch(/of 90 readings are in zone C or D/);
    await expect(rig.learning.accept('pump-1', 'ann')).rejects.toThrow(/^nothing to accept: h: /);
  });

  it('says how few readings there were', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    await rig.start(0.05);
    await rig.run(18, (i) => (i < 9 ? { mmS: 2 } : { mmS: 0.1, running: false }));
    expect((await rig.point('h')).refused).toBe('9 good readings while running, 30 are needed');
  });

  it('goes on after a restart with what was collected up to five minutes before', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    await rig.start(1);
    await rig.run(100, () => ({ mmS: 2 }));
    rig.learning = rig.open();
    const { learning, points } = await rig.learning.show('pump-1');
    // Saved at 300, 600 and 900 s: 90 readings; an hour less the quarter.
    expect(points.h).toMatchObject({ readings: 90 });
    expect(learning?.hours_left).toBe(0.75);
    await rig.run(270, () => ({ mmS: 2 }));
    expect((await rig.point('h')).proposed?.ranges[0]?.figures['velocity.overall']).toMatchObject({
      median: 2,
    });
  });

  describe('of a machine that leaves the configuration', () => {
    const without = planAlarms(makeStation([makeMachine('pump-2', [makePoint('pump-2', 'h', 'node-1')])]));
    const keysOf = (rig: Rig) => Object.keys(rig.rows).toSorted();
    const learningFor10Min = async () => {
      const rig = new Rig();
      await rig.run(1, () => ({ mmS: 2 }));
      await rig.start(1);
      await rig.run(60, () => ({ mmS: 2 }));
      expect(keysOf(rig)).toEqual(['learning:pump-1', 'samples:pump-1/a', 'samples:pump-1/h']);
      return rig;
    };
    const isForgotten = async (rig: Rig) => {
      await until(() => keysOf(rig).length === 0, 'the rows to go');
      rig.plan = rig.bench.plan;
      rig.learning = rig.open();
      const { learning, points } = await rig.learning.show('pump-1');
      expect(learning).toBeNull();
      expect(points.h).toMatchObject({ readings: null, proposed: null });
    };

    it('is over, also when that comes back after a restart', async () => {
      const rig = await learningFor10Min();
      rig.plan = without;
      rig.learning.tick(1);
      await isForgotten(rig);
    });

    it('is over where it left while the agent was down, or in its last second', async () => {
      const down = await learningFor10Min();
      down.plan = without;
      down.learning = down.open();
      down.learning.tick(1);
      await isForgotten(down);
      const stopping = await learningFor10Min();
      stopping.plan = without;
      await stopping.learning.stop();
      expect(stopping.failures).toBe(0);
      await isForgotten(stopping);
    });
  });

  it('keeps its state where a commit fails, and proposes when the disk is well again', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    rig.failing = true;
    await expect(rig.start(0.1)).rejects.toThrow('the disk is full');
    expect((await rig.learning.show('pump-1')).learning).toBeNull();
    rig.failing = false;
    await rig.start(0.1);
    rig.failing = true;
    await rig.run(36, () => ({ mmS: 2 }));
    expect(rig.failures).toBeGreaterThan(0);
    expect((await rig.point('h')).proposed).toBeNull();
    rig.failing = false;
    await new Promise((resolve) => setImmediate(resolve));
    rig.learning.tick(1);
    expect((await rig.point('h')).proposed).not.toBeNull();
  });

  it('one at a time; reject ends it and leaves what was accepted', async () => {
    const rig = new Rig();
    await rig.run(1, () => ({ mmS: 2 }));
    await expect(rig.learning.reject('pump-1', 'ann')).rejects.toThrow(/^nothing to reject/);
    await rig.start(0.1);
    await expect(rig.start(0.1)).rejects.toThrow(/^learning is under way since /);
    await expect(rig.learning.accept('pump-1', 'ann')).rejects.toThrow(
      /^learning is under way for 0\.10 h more/,
    );
    await rig.run(36, () => ({ mmS: 2 }));
    await rig.learning.accept('pump-1', 'ann');
    await rig.start(0.1);
    await rig.learning.reject('pump-1', 'ann');
    const { learning, points } = await rig.learning.show('pump-1');
    expect(learning).toBeNull();
    expect(points.h).toMatchObject({ proposed: null, refused: null, accepted: { ranges: [{}] } });
  });
});

describe('the room for samples', () => {
  const sample = (value: number) => ({ shaftHz: 25, highZone: false, figures: { w: value } });

  it('keeps them all while there are few, and then evenly spread over all of them', () => {
    let few = NO_SAMPLES;
    for (let i = 0; i < 300; i++) few = addSample(few, sample(i));
    expect(few.kept).toHaveLength(300);
    let many = NO_SAMPLES;
    for (let i = 0; i < 1000; i++) many = addSample(many, sample(i));
    // The worked number of addSample: each fourth, 250.
    expect(many.kept.map(({ figures }) => figures.w)).toEqual(Array.from({ length: 250 }, (_, i) => 4 * i));
    expect(many.seen).toBe(1000);
    let most = NO_SAMPLES;
    for (let i = 0; i < 60_000; i++) most = addSample(most, sample(i));
    expect(most.kept.length).toBeLessThan(400);
    expect(most.kept.length).toBeGreaterThanOrEqual(200);
  });
});
