import { describe, expect, test } from 'vitest';
import { type Baseline, baselineFor, learnBaseline, learnSample } from '../../src/alarm/baseline.ts';
import { baselineLimit } from '../../src/alarm/limits.ts';
import { riseOver } from '../../src/alarm/rise.ts';
import { alarmsIn, Bench, makePoint, makeReading, onePoint, type Shown, zoneRule } from './support.ts';

const WATCHES = ['velocity.overall', 'acceleration.rms'];

const samplesOf = (shown: readonly Shown[]) =>
  shown.map((one) => learnSample(makeReading(one), WATCHES)).filter((sample) => sample !== null);

const times = (n: number, shown: (i: number) => Shown) => Array.from({ length: n }, (_, i) => shown(i));

describe('learning', () => {
  test('median and median absolute deviation: a tenth of wild readings moves them by next to nothing', () => {
    const wild = samplesOf(times(100, (i) => ({ mmS: i % 10 === 0 ? 3.9 : 1 + 0.01 * (i % 5) })));
    const learned = learnBaseline(wild);
    expect(learned.ok && learned.baseline.ranges[0]!.figures['velocity.overall']).toMatchObject({
      readings: 100,
    });
    // By hand: 90 values 1.00 to 1.04, 10 at 3.9; the 50th and 51st in order lie at 1.02 and 1.03 or nearer.
    const figure = learned.ok ? learned.baseline.ranges[0]!.figures['velocity.overall']! : null;
    expect(figure!.median).toBeGreaterThanOrEqual(1.02);
    expect(figure!.median).toBeLessThanOrEqual(1.03);
    expect(figure!.mad).toBeLessThanOrEqual(0.02);
  });

  test('only good readings of a machine that runs count', () => {
    expect(learnSample(makeReading({ running: false }), WATCHES)).toBeNull();
    expect(learnSample(makeReading({ running: null }), WATCHES)).toBeNull();
    expect(learnSample(makeReading({ mmS: null }), WATCHES)).toBeNull();
    expect(learnSample(makeReading({ quality: 'uncertain' }), WATCHES)).toBeNull();
    expect(learnSample(makeReading({ mmS: 2, g: 0.3 }), WATCHES)).toEqual({
      shaftHz: 24.7,
      highZone: false,
      figures: { 'velocity.overall': 2, 'acceleration.rms': 0.3 },
    });
  });

  test('too few are refused, with the numbers', () => {
    const learned = learnBaseline(samplesOf(times(29, () => ({ mmS: 1 }))));
    expect(learned).toEqual({ ok: false, reason: '29 good readings while running, 30 are needed' });
  });

  test('a machine in zone C is refused, one with a few such readings is not', () => {
    const share = (high: number) => learnBaseline(samplesOf(times(100, (i) => ({ mmS: i < high ? 5 : 2 }))));
    expect(share(10).ok).toBe(true);
    const refused = share(11);
    expect(refused.ok).toBe(false);
    expect(refused.ok ? '' : refused.reason).toMatch(/^11 of 100 readings are in zone C or D/);
  });

  test('by range of speed, each with its own value, and one with too few left out', () => {
    const learned = learnBaseline(
      samplesOf([
        ...times(40, (i) => ({ mmS: 1, shaftHz: 15 + 0.01 * i })),
        ...times(40, (i) => ({ mmS: 2, shaftHz: 24 + 0.01 * i })),
        ...times(5, () => ({ mmS: 3, shaftHz: 19 })),
      ]),
    );
    expect(learned.ok && learned.notes).toEqual(['19.0 to 19.0 Hz: 5 readings, 30 are needed']);
    const baseline = (learned as { baseline: Baseline }).baseline;
    const at = (hz: number | null) => baselineFor(baseline, 'velocity.overall', hz)?.median ?? null;
    expect([at(15), at(24.2), at(19), at(30), at(null)]).toEqual([1, 2, null, null, null]);
  });

  test('where only one range was learned, a reading of unknown speed is held to it', () => {
    const learned = learnBaseline(samplesOf(times(40, () => ({ mmS: 1 }))));
    expect(learned.ok && baselineFor(learned.baseline, 'velocity.overall', null)?.median).toBe(1);
    expect(learned.ok && baselineFor(learned.baseline, 'velocity.low', null)).toBeNull();
  });
});

describe('baseline limits', () => {
  const part3 = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;
  const point = makePoint('pump-1', 'de-h', 'node-1', { severity: part3 });
  // ISO 10816-3:2009 5.4.1 and 5.4.2 with group 2 rigid: baseline 0.9 gives 1.6, 2.9 gives 3.5 (cap); trip 5.625 mm/s.
  test.each([
    [0.9, 1, 'alert', 1.6],
    [2.9, 2, 'alert', 3.5],
    [2.9, 4, 'danger', 5.625],
    [0.3, 2, 'alert', 1.0],
    [1.2, 2, 'alert', 2.4],
  ] as const)('%d mm/s times %d, %s: %d mm/s', (median, factor, level, limit) => {
    expect(baselineLimit(point, 'velocity.overall', median, factor, level)).toBeCloseTo(limit, 9);
  });

  test('figures that are no velocities have the plain multiple', () => {
    expect(baselineLimit(point, 'acceleration.rms', 0.01, 2, 'alert')).toBeCloseTo(0.02, 12);
  });

  test('below 1 they are shares: a mean frequency that falls to 0.4 of what it was is told as a loose sensor', () => {
    const rule = {
      ...zoneRule,
      id: 'mount',
      watch: 'acceleration.mean_hz',
      test: { kind: 'baseline', alert: 0.5, danger: null } as const,
      onDelayS: 0,
    };
    const bench = new Bench(onePoint([rule]));
    const figures = { 'acceleration.mean_hz': { median: 4000, mad: 100, readings: 99 } };
    const baseline: Baseline = { version: 1, ranges: [{ hz: null, figures }] };
    const put = (meanHz: number) => {
      const reading = makeReading({ meanHz });
      return alarmsIn(
        bench.put({ kind: 'reading', pointKey: 'pump-1/de-h', reading, t: bench.t, elapsedS: 10, baseline }),
      );
    };
    expect(put(4400)).toEqual([]);
    expect(put(2100)).toEqual([]);
    const [alarm] = put(1600);
    expect(alarm).toMatchObject({ level: 'alert', value: 1600, limit: 2000, unit: 'Hz' });
    expect(alarm!.reason).toBe(
      'mean frequency of the acceleration below 2000 Hz: alert limit of the learned value 4000, factor 0.5',
    );
    expect(alarm!.check).toMatch(/sensor still sits tight/);
  });

  test('0.3 mm/s doubling to 0.6 stays quiet; a true rise is told with what was learned', () => {
    const rule = {
      ...zoneRule,
      id: 'shift',
      test: { kind: 'baseline', alert: 2, danger: 4 } as const,
      onDelayS: 0,
    };
    const bench = new Bench(onePoint([rule]));
    const figures = { 'velocity.overall': { median: 0.3, mad: 0.01, readings: 99 } };
    const baseline: Baseline = { version: 1, ranges: [{ hz: [24, 25], figures }] };
    const put = (shown: Shown) => {
      const reading = makeReading(shown);
      return bench.put({
        kind: 'reading',
        pointKey: 'pump-1/de-h',
        reading,
        t: bench.t,
        elapsedS: 10,
        baseline,
      });
    };
    expect(alarmsIn(put({ mmS: 0.65 }))).toEqual([]);
    // Another speed than learned: nothing can be said, and nothing is.
    expect(alarmsIn(put({ mmS: 3, shaftHz: 12.3 }))).toEqual([]);
    put({ mmS: 0.65, shaftHz: 24.6 });
    const [alarm] = alarmsIn(put({ mmS: 1.4, shaftHz: 24.6 }));
    // B/C of category I is 4.0 mm/s, a quarter of it 1.0: limit 1.3 mm/s, and 2.3 mm/s for danger.
    expect(alarm).toMatchObject({ level: 'alert', value: 1.4, limit: 1.3 });
    expect(alarm!.reason).toBe(
      'velocity overall above 1.3 mm/s: alert limit of the learned value 0.3, factor 2',
    );
    expect(alarmsIn(put({ mmS: 2.4, shaftHz: 24.6 }))[0]).toMatchObject({ level: 'danger', limit: 2.3 });
  });
});

describe('a rise over days', () => {
  const days = (n: number, value: (day: number, i: number) => number, perDay = 8) =>
    Array.from({ length: n * perDay }, (_, i) => ({ day: i / perDay, value: value(i / perDay, i) }));
  /** Even scatter that repeats, so that nothing here is random. */
  const scatter = (i: number) => ((i * 7919) % 101) / 101 - 0.5;

  test('2.0 rising by 0.1 a day over 10 days is 50 %', () => {
    const rise = riseOver(
      days(11, (day) => 2 + 0.1 * day),
      10,
    )!;
    // The span ends at day 10.875 and begins at 0.875, where the level is 2.0875: 1 / 2.0875.
    expect(rise.pct).toBeCloseTo(100 / 2.0875, 6);
    expect(rise.atLeastPct).toBeCloseTo(rise.pct, 6);
  });

  test('scatter of 10 % about a rise of 60 % is seen through', () => {
    const rise = riseOver(
      days(7, (day, i) => (1 + (0.6 * day) / 7) * (1 + 0.2 * scatter(i))),
      7,
    )!;
    expect(rise.pct).toBeGreaterThan(45);
    expect(rise.pct).toBeLessThan(75);
    expect(rise.atLeastPct).toBeGreaterThan(30);
  });

  test.each([2, 3.5, 5])('one step of 60 %% on day %d is not a rise', (at) => {
    const rise = riseOver(
      days(7, (day, i) => (day < at ? 1 : 1.6) * (1 + 0.1 * scatter(i))),
      7,
    )!;
    expect(rise.pct).toBe(0);
  });

  test('scatter alone is not sure of anything', () => {
    const rise = riseOver(
      days(7, (_, i) => 1 + 0.4 * scatter(i)),
      7,
    )!;
    expect(rise.atLeastPct).toBeLessThanOrEqual(0);
    expect(Math.abs(rise.pct)).toBeLessThan(20);
  });

  test('a fifth of wild values does not bend it (Theil-Sen breaks down at 29 %)', () => {
    const rise = riseOver(
      days(7, (day, i) => (i % 5 === 0 ? 9 : 1 + 0.1 * day)),
      7,
    )!;
    expect(rise.pct).toBeGreaterThan(50);
    expect(rise.pct).toBeLessThan(90);
  });

  test('too few samples, or too short a history, say nothing', () => {
    expect(
      riseOver(
        days(1, (day) => 1 + day),
        7,
      ),
    ).toBeNull();
    expect(
      riseOver(
        days(7, (day) => 1 + day, 1),
        7,
      ),
    ).toBeNull();
    expect(riseOver([], 7)).toBeNull();
  });

  test('a thousand samples are thinned and say the same', () => {
    const rise = riseOver(
      days(10, (day) => 2 + 0.1 * day, 100),
      10,
    )!;
    expect(rise.pct).toBeCloseTo(50, 0);
  });

  test('as a rule: told with its confidence, cleared when the trend is over', () => {
    const rise = { kind: 'rise', alertPct: 50, dangerPct: null, overDays: 7 } as const;
    const bench = new Bench(onePoint([{ ...zoneRule, id: 'trend', watch: 'acceleration.rms', test: rise }]));
    const put = (value: (day: number) => number) =>
      alarmsIn(bench.put({ kind: 'trend', alarm: 'pump-1/de-h.trend', samples: days(8, value), t: bench.t }));
    expect(put(() => 0.4)).toEqual([]);
    const [alarm] = put((day) => 0.4 + 0.05 * day);
    expect(alarm).toMatchObject({ state: 'unacknowledged', level: 'alert', unit: '%', limit: 50 });
    expect(alarm!.reason).toMatch(/acceleration rms up .* % over 7 days, .* with 95 % confidence/);
    expect(put((day) => (day < 4 ? 0.4 : 0.8)).map(({ state }) => state)).toEqual([
      'returned-unacknowledged',
    ]);
    expect(() => bench.put({ kind: 'trend', alarm: 'pump-1/de-h.zone', samples: [], t: bench.t })).toThrow(
      RangeError,
    );
  });
});
