import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
  designLowpass,
  filterGain,
  kaiserBeta,
  kaiserTaps,
  kaiserWindow,
  windowedLowpass,
} from '../../src/signal/kaiser.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { decibels } from './support.ts';

/** Least attenuation above stopHz and largest deviation from 0 dB up to passHz, on a fine grid. */
function measure(taps: Float64Array, rateHz: number, passHz: number, stopHz: number) {
  let stop = 0;
  let high = 0;
  let low = 0;
  const steps = 40 * taps.length;
  for (let i = 0; i <= steps; i++) {
    stop = Math.max(stop, Math.abs(filterGain(taps, rateHz, stopHz + ((rateHz / 2 - stopHz) * i) / steps)));
    const db = decibels(filterGain(taps, rateHz, (passHz * i) / steps));
    high = Math.max(high, db);
    low = Math.min(low, db);
  }
  return { stopDb: decibels(stop), high, low };
}

// Oppenheim and Schafer's formula; 65 dB as in scipy's documentation of kaiser_beta, the others computed with scipy.
it.each([
  [65, 6.20426, 5],
  [40, 3.3953210523, 9],
  [50, 4.533514121, 9],
  [80, 7.85726, 5],
  [20, 0, 12],
])('β of %d dB is %f', (attenuationDb, beta, digits) => {
  expect(kaiserBeta(attenuationDb)).toBeCloseTo(beta, digits);
});

it('designs the published eleven taps', () => {
  // Computed with scipy.signal.firwin(11, 0.5, window=('kaiser', 4.533514120981)).
  const half = [0.003544299655, 0, -0.048509832966, 0, 0.294365451658, 0.501200163307];
  const taps = windowedLowpass(11, 0.25, 1, 4.533514120981);
  for (let i = 0; i < 11; i++) expect(taps[i]).toBeCloseTo(half[Math.min(i, 10 - i)]!, 11);
  expect(taps.reduce((a, b) => a + b)).toBeCloseTo(1, 14);
});

describe('the plain estimate, before reserve (figures computed with scipy)', () => {
  it.each([
    { passHz: 2500, stopHz: 3900, taps: 93, stopDb: -78.79 },
    { passHz: 1000, stopHz: 1560, taps: 231, stopDb: -79.25 },
  ])(
    'rate 25 600, $passHz to $stopHz Hz at 80 dB: $taps taps, $stopDb dB',
    ({ passHz, stopHz, taps, stopDb }) => {
      const n = kaiserTaps({ rateHz: 25_600, passHz, stopHz, attenuationDb: 80 });
      expect(n).toBe(taps);
      const seen = measure(
        windowedLowpass(n, (passHz + stopHz) / 2, 25_600, kaiserBeta(80)),
        25_600,
        passHz,
        stopHz,
      );
      expect(seen.stopDb).toBeCloseTo(stopDb, 1);
      if (taps === 93) {
        expect(seen.high).toBeCloseTo(0.00073, 5);
        expect(seen.low).toBeCloseTo(-0.00103, 5);
      }
    },
  );
});

it('holds what it is asked for, in the stop band and in the pass band', () => {
  fc.assert(
    fc.property(
      fc.double({ min: 0.01, max: 0.35, noNaN: true }),
      fc.double({ min: 0.03, max: 0.14, noNaN: true }),
      fc.integer({ min: 30, max: 110 }),
      (pass, width, attenuationDb) => {
        const taps = designLowpass({ rateHz: 1, passHz: pass, stopHz: pass + width, attenuationDb });
        const seen = measure(taps, 1, pass, pass + width);
        // The design's own grid may miss the top of a lobe by a hair.
        expect(seen.stopDb).toBeLessThanOrEqual(-attenuationDb + 0.05);
        // Both bands ripple alike, but gain is set at 0 Hz, and a narrow pass band also gets the ripple of its mirror image.
        expect(Math.max(seen.high, -seen.low)).toBeLessThan(decibels(1 + 3 * 10 ** (-attenuationDb / 20)));
        expect(taps.length % 2).toBe(1);
        for (let i = 0; i < taps.length; i++) expect(taps[i]).toBe(taps[taps.length - 1 - i]);
      },
    ),
    { seed: 21, numRuns: 25 },
  );
});

it('gives the worked examples', () => {
  expect(designLowpass({ rateHz: 25_600, passHz: 2500, stopHz: 3900, attenuationDb: 80 }).length).toBe(97);
  expect(kaiserWindow(11, 0)[0]).toBe(1);
  expect(filterGain(Float64Array.of(0.25, 0.5, 0.25), 4, 1)).toBeCloseTo(0.5, 15);
  // I0(2) = 2.2795853 (Abramowitz and Stegun, table 9.8; from memory).
  expect(kaiserWindow(3, 2)[0]).toBeCloseTo(1 / 2.2795853, 7);
});

it.each([
  [{ rateHz: 0, passHz: 1, stopHz: 2, attenuationDb: 80 }, 'rateHz'],
  [{ rateHz: 10, passHz: 0, stopHz: 2, attenuationDb: 80 }, 'passHz'],
  [{ rateHz: 10, passHz: 2, stopHz: 2, attenuationDb: 80 }, 'stopHz'],
  [{ rateHz: 10, passHz: 2, stopHz: 5.1, attenuationDb: 80 }, 'stopHz'],
  [{ rateHz: 10, passHz: 2, stopHz: 3, attenuationDb: 20.9 }, 'attenuationDb'],
  [{ rateHz: 10, passHz: 2, stopHz: 3, attenuationDb: 140.1 }, 'attenuationDb'],
  [{ rateHz: 10, passHz: 2, stopHz: Number.NaN, attenuationDb: 80 }, 'stopHz'],
  [{ rateHz: 1e6, passHz: 2, stopHz: 3, attenuationDb: 80 }, 'stopHz'],
])('refuses %o, naming %s', (options, quantity) => {
  expect(() => designLowpass(options)).toThrow(SignalRangeError);
  expect(() => designLowpass(options)).toThrow(new RegExp(`^${quantity} is `));
});

it('refuses an even number of taps and an attenuation of nothing', () => {
  expect(() => windowedLowpass(10, 1, 4, 5)).toThrow(SignalRangeError);
  expect(() => kaiserBeta(0)).toThrow(SignalRangeError);
  expect(() => kaiserTaps({ rateHz: 10, passHz: 2, stopHz: 3, attenuationDb: 8 })).toThrow(SignalRangeError);
});
