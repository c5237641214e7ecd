import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import type { Reading } from '../../src/measure/reading.ts';
import type { SampleRecord } from '../../src/measure/record.ts';
import { G_PER_COUNT, gOfVelocity, planOf, recordOf } from './bench.ts';

const plan = planOf();
const tones = [[24.7, gOfVelocity(3, 24.7)]] as const;

function healthy(): SampleRecord {
  return recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones, noiseG: 0.05 });
}

function expectNothing(reading: Reading): void {
  expect(reading.quality).toBe('bad');
  expect(reading).toMatchObject({
    shaft: { hz: null, source: null },
    velocity: { unit: 'mm/s', overall: null, low: null, 'running-speed': null, harmonics: null },
    displacement: { rms: null, p2p: null },
    orders: { '1': { mm_s: null, deg: null }, '2': { mm_s: null }, '3': { mm_s: null } },
    acceleration: { rms: null, peak: null, crest: null, kurtosis: null },
    envelope: null,
    zone: null,
    running: null,
  });
}

describe('a record that cannot be trusted has no figures at all', () => {
  it('is measured where nothing is wrong', () => {
    const reading = measureRecord(plan, healthy());
    expect(reading).toMatchObject({ quality: 'good', why: [], running: true, zone: 'B' });
  });

  it('gap', () => {
    const reading = measureRecord(plan, { ...healthy(), missingSamples: 17 });
    expectNothing(reading);
    expect(reading.why).toEqual(['gap: 17 samples missing']);
  });

  it('gap alone, where its zeros are a good part of the record', () => {
    const record = healthy();
    record.counts.fill(0, 100_000, 200_000);
    const { why } = measureRecord(plan, { ...record, missingSamples: 100_000 });
    expect(why).toEqual(['gap: 100000 samples missing']);
  });

  it('distrust of the link, in its own words', () => {
    const reading = measureRecord(plan, { ...healthy(), distrust: ['foreign node: 9 instead of 7'] });
    expectNothing(reading);
    expect(reading.why).toEqual(['foreign node: 9 instead of 7']);
  });

  it('distrust alone, where the link has no samples either', () => {
    const record = { ...healthy(), counts: new Int32Array(0), distrust: ['no device at /dev/none'] };
    expect(measureRecord(plan, record).why).toEqual(['no device at /dev/none']);
  });

  it.each([32767, -32768])('over-range: more than a thousandth of the counts at %d', (count) => {
    const record = healthy();
    record.counts.fill(count, 1000, 1411);
    const reading = measureRecord(plan, record);
    expectNothing(reading);
    expect(reading.why).toEqual(['over-range: 411 samples at the limit of the converter']);
  });

  it('over-range of the sensor, before the converter is at its own', () => {
    const sensor = { usableHz: null, rangeG: 2, mount: null };
    const record = healthy();
    record.counts.fill(2.1 / G_PER_COUNT, 1000, 1500);
    const reading = measureRecord(planOf({ point: { sensor } }), record);
    expectNothing(reading);
    expect(reading.why.join()).toMatch(/over-range: 500 samples beyond the sensor's 2 g/);
  });

  it('clipping before the converter', () => {
    const record = healthy();
    const rail = 0.15 / G_PER_COUNT;
    record.counts.forEach((count, i) => {
      record.counts[i] = Math.max(-rail, Math.min(rail, count));
    });
    const reading = measureRecord(plan, record);
    expectNothing(reading);
    expect(reading.why.join()).toMatch(/^over-range: \d+ samples clipped before the converter$/);
  });

  it('flat line, whole or for a good part of the record', () => {
    const dead = healthy();
    dead.counts.fill(7);
    expectNothing(measureRecord(plan, dead));
    expect(measureRecord(plan, dead).why).toEqual(['flat line: the counts never change']);
    const dying = healthy();
    dying.counts.fill(3, 300_000);
    expectNothing(measureRecord(plan, dying));
    expect(measureRecord(plan, dying).why.join()).toMatch(
      /flat line: the counts stand still for 1096\d\d samples/,
    );
  });

  it('names every reason at once', () => {
    const dead = healthy();
    dead.counts.fill(32767);
    const reading = measureRecord(plan, { ...dead, missingSamples: 1, distrust: ['stale'] });
    expect(reading.why).toEqual(['stale', 'gap: 1 samples missing', 'flat line: the counts never change']);
  });

  it('empty, or too short for any spectrum', () => {
    expect(measureRecord(plan, { ...healthy(), counts: new Int32Array(0) }).why).toEqual([
      'record too short: it is empty',
    ]);
    const stub = measureRecord(plan, { ...healthy(), counts: healthy().counts.slice(0, 300) });
    expectNothing(stub);
    expect(stub.why).toEqual(['record too short: 300 samples give no spectrum']);
  });
});

describe('a short record loses averages first, then lines, then figures', () => {
  const cut = (seconds: number) => {
    const record = healthy();
    return measureRecord(plan, { ...record, counts: record.counts.slice(0, Math.round(seconds * 40_960)) });
  };

  it('fewer averages', () => {
    const reading = cut(5.2);
    expect(reading.quality).toBe('uncertain');
    expect(reading.why).toContainEqual('record too short: 5.20 s give 2 of 4 averages');
    expect(Math.abs(reading.velocity.overall! / 3 - 1)).toBeLessThan(0.02);
  });

  it('fewer lines', () => {
    const reading = cut(2);
    expect(reading.quality).toBe('uncertain');
    expect(reading.why.join('\n')).toMatch(/record too short: 2.00 s give 13\d\d of 3200 lines/);
    expect(Math.abs(reading.velocity.overall! / 3 - 1)).toBeLessThan(0.03);
  });

  it('no velocity from 10 Hz where lines are wider than 5 Hz, but the acceleration still', () => {
    const reading = cut(0.2);
    expect(reading.velocity.overall).toBeNull();
    expect(reading.displacement).toMatchObject({ rms: null, p2p: null });
    expect(reading.zone).toBeNull();
    expect(reading.running).toBeNull();
    expect(reading.why.join('\n')).toMatch(/record too short: overall velocity from 10 Hz needs lines finer/);
    expect(reading.acceleration.rms).toBeCloseTo(Math.hypot(0.05, gOfVelocity(3, 24.7) / Math.SQRT2), 2);
  });
});

describe('caveats of the plan', () => {
  it('make every reading uncertain, with the reason', () => {
    const sensor = { usableHz: [20, 10_000], rangeG: null, mount: 'magnet' } as const;
    const reading = measureRecord(planOf({ point: { sensor } }), healthy());
    expect(reading.quality).toBe('uncertain');
    expect(reading.why.join()).toMatch(
      /overall velocity wants 10 to 1000 Hz, the sensor is usable over 20 to 10000 Hz/,
    );
    expect(reading.velocity.overall).not.toBeNull();
  });

  it('a band out of reach is null and says so', () => {
    const bands = [{ id: 'high', range: { hz: [900, 1200] } }] as const;
    const reading = measureRecord(planOf({ measure: { bands } }), healthy());
    expect(reading.velocity.high).toBeNull();
    expect(reading.why).toEqual(['band high: 900 to 1200 Hz reaches above Fmax, 1000 Hz']);
  });
});

describe('a few counts over range', () => {
  it.each([32767, -32768])('of %d leave the rest uncertain, and no peak, crest or kurtosis', (count) => {
    const whole = measureRecord(plan, healthy());
    const record = healthy();
    record.counts[1234] = count;
    const reading = measureRecord(plan, record);
    expect(reading.quality).toBe('uncertain');
    expect(reading.why).toContain('over-range: 1 samples at the limit of the converter');
    expect(reading.acceleration).toMatchObject({ peak: null, crest: null, kurtosis: null });
    expect(reading.velocity.overall).toBeCloseTo(whole.velocity.overall ?? Number.NaN, 1);
    expect(reading.envelope?.mean).toBeGreaterThan(0);
  });

  it('count also where the sensor ends before the converter', () => {
    const sensor = { usableHz: null, rangeG: 2, mount: null };
    const record = healthy();
    record.counts[99] = 2.1 / G_PER_COUNT;
    const reading = measureRecord(planOf({ point: { sensor } }), record);
    expect(reading.quality).toBe('uncertain');
    expect(reading.why).toContain("over-range: 1 samples beyond the sensor's 2 g");
  });
});
