import { describe, expect, it } from 'vitest';
import type { Reading } from '../../src/measure/reading.ts';
import { lastSentOf, whySend } from '../../src/uplink/publish-policy.ts';
import { readingOf } from '../support/readings.ts';

const settings = { changePct: 20, minIntervalS: 300, atLeastS: 7200 };
const last = lastSentOf(readingOf(), 1000);

function changed(change: (reading: Reading) => void): Reading {
  const reading = readingOf();
  change(reading);
  return reading;
}

/** Why a reading `sinceS` after the last one is sent. */
const why = (sinceS: number, change: (reading: Reading) => void = () => undefined) =>
  whySend(last, changed(change), 1000 + sinceS, settings);

describe('a reading is worth sending', () => {
  it('when it is the first', () => {
    expect(whySend(null, readingOf(), 5, settings)).toBe('first');
  });

  it('at least every so often, and not before without news', () => {
    expect(why(7199.9)).toBeNull();
    expect(why(7200)).toBe('due');
  });

  it('at once when the zone changes, to null and from null too', () => {
    expect(
      why(0.1, (r) => {
        r.zone = 'C';
      }),
    ).toBe('zone');
    expect(
      why(0.1, (r) => {
        r.zone = null;
      }),
    ).toBe('zone');
  });

  it('at once when the accused part changes', () => {
    expect(
      why(0.1, (r) => {
        r.envelope!.defect = null;
      }),
    ).toBe('defect');
    expect(
      why(0.1, (r) => {
        r.envelope = null;
      }),
    ).toBe('defect');
  });

  it('when the overall velocity moved by more than a fifth, after the least interval', () => {
    const up = (factor: number) => (r: Reading) => {
      r.velocity.overall = 2.31 * factor;
    };
    expect(why(300, up(1.19))).toBeNull();
    expect(why(300, up(1.21))).toBe('change');
    expect(why(300, up(0.79))).toBe('change');
    expect(why(299.9, up(10))).toBeNull();
  });

  it('when a band moved by a fifth of the whole, not of itself', () => {
    expect(
      why(300, (r) => {
        r.velocity.low = 0.42;
      }),
    ).toBeNull();
    expect(
      why(300, (r) => {
        r.velocity.low = 0.21 + 0.47;
      }),
    ).toBe('change');
  });

  it('when acceleration or envelope moved', () => {
    expect(
      why(300, (r) => {
        r.acceleration.rms = 0.5;
      }),
    ).toBe('change');
    expect(
      why(300, (r) => {
        r.envelope!.mean = 0.04;
      }),
    ).toBe('change');
    expect(
      why(300, (r) => {
        r.envelope!.mean = 0.036;
      }),
    ).toBeNull();
  });

  it('when a figure is lost or found, or the quality changes', () => {
    expect(
      why(300, (r) => {
        r.velocity.overall = null;
      }),
    ).toBe('change');
    expect(
      why(300, (r) => {
        r.quality = 'uncertain';
      }),
    ).toBe('change');
    expect(
      why(299, (r) => {
        r.quality = 'uncertain';
      }),
    ).toBeNull();
  });

  it('not for the noise of a machine that stands still', () => {
    const still = (overall: number) =>
      changed((r) => {
        r.velocity = { unit: 'mm/s', overall, low: overall / 2 };
        r.acceleration.rms = overall / 100;
        r.envelope = null;
        r.zone = null;
      });
    const before = lastSentOf(still(0.02), 0);
    expect(whySend(before, still(0.05), 300, settings)).toBeNull();
    expect(whySend(before, still(0.07), 300, settings)).toBe('change');
  });
});
