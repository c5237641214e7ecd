/**
 * Every node's clock is off by some parts per million, and sizes are planned at the nominal rate. Settings that just
 * suffice at that rate must suffice at the real one too: a figure that comes and goes with a clock's drift is a defect.
 */
import { describe, expect, it } from 'vitest';
import { measureRecord } from '../../src/measure/measure.ts';
import { type BenchOptions, gOfVelocity, planOf, recordOf, usual } from './bench.ts';

const bearing = { id: 'de', geometry: null, elements: 9, multiples: null };

/** Settings at one edge or another, all of round numbers that a person would write. */
const settings: [string, BenchOptions][] = [
  // Two Hann lines of 5 Hz reach from 10 Hz to 0.
  ['the main lobe at 10 Hz just clear of 0', { measure: { velocity: velocity(1000, 200, 8) } }],
  // 16 periods of 10 Hz, what displacement over time needs.
  [
    '16 periods of 10 Hz',
    { rateHz: 5120, measure: { velocity: velocity(1000, 800, 3), envelope: envelope(100, 2) } },
  ],
  [
    '16 periods of 10 Hz at a rate that is no multiple',
    { rateHz: 12_000, measure: { velocity: velocity(1000, 800, 3) } },
  ],
  [
    'fewer than 16 periods',
    { rateHz: 5120, measure: { velocity: velocity(1000, 400, 3), envelope: envelope(100, 2) } },
  ],
  ['one average', { measure: { velocity: velocity(1000, 800, 1), envelope: envelope(1600, 1) } }],
  ['two averages', { measure: { velocity: velocity(1000, 800, 2), envelope: envelope(1600, 2) } }],
  // The envelope decides how long the record is.
  ['a fine envelope', { measure: { velocity: velocity(1000, 800, 2), envelope: envelope(3200, 2) } }],
  ['a coarse envelope', { measure: { velocity: velocity(1000, 400, 2), envelope: envelope(100, 2, 500) } }],
  ['bands at their edges', { measure: { bands: [{ id: 'a', range: { hz: [1000 / 1600, 1000] } }] } }],
  ['a rate that carries less than was asked for', { rateHz: 2000 }],
  [
    'a slow shaft',
    {
      machine: { shaft: { kind: 'fixed', rpm: 300, tolerancePct: 3 } },
      measure: { velocity: velocity(1000, 1000, 9) },
    },
  ],
];

function velocity(fmaxHz: number, lines: number, averages: number) {
  return { ...usual.velocity, fmaxHz, lines, averages };
}
function envelope(lines: number, averages: number, fmaxHz: number | 'auto' = 'auto') {
  return { ...usual.envelope, lines, averages, fmaxHz };
}

describe('a clock that is off', () => {
  it.each(settings)('changes no verdict: %s', (_, options) => {
    // A short interval: the settings alone decide how long a record is.
    const measure = { everyS: 0.1, ...options.measure };
    const plan = planOf({ ...options, measure, point: { bearings: [bearing] } });
    const tellsAt = (ratio: number) => {
      const rateHz = plan.rateHz * ratio;
      const shaftHz = plan.shaft!.nominalHz!;
      const tones = [[shaftHz, gOfVelocity(2, shaftHz)]] as const;
      const record = recordOf({ rateHz, samples: plan.recordSamples, tones, noiseG: 0.01 });
      const { quality, why, velocity, displacement, envelope } = measureRecord(plan, record);
      const nulls = Object.entries({ ...velocity, ...displacement, envelope }).flatMap(([key, value]) =>
        value === null ? [key] : [],
      );
      return { quality, why: why.map((text) => text.replaceAll(/[\d.]+/g, '#')).sort(), nulls };
    };
    const nominal = tellsAt(1);
    for (const ratio of [1 - 2e-5, 1 + 2e-5, 1 - 1e-3, 1 + 1e-3, 0.98, 1.02]) {
      expect({ ratio, ...tellsAt(ratio) }).toEqual({ ratio, ...nominal });
    }
    // What the settings rule out, check has told: a record is too short for nothing else.
    const short = nominal.why.filter((text) => /too short/.test(text));
    const told = plan.warnings.some((text) => text.startsWith('no bearing will be judged'));
    expect(short).toEqual(told ? [expect.stringContaining('too short to judge a bearing')] : []);
    const p2pTold = plan.warnings.some((text) => text.startsWith('displacement peak to peak'));
    expect(nominal.nulls.includes('p2p')).toBe(p2pTold);
  });
});
