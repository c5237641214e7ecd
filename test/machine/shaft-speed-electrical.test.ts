import { expect, it } from 'vitest';
import { synchronousHz } from '../../src/machine/electrical.ts';

// 120·f/poles, as in any handbook of electrical machines.
it.each([
  [50, 2, 3000],
  [50, 4, 1500],
  [50, 6, 1000],
  [60, 4, 1800],
])('synchronous speed at %d Hz with %d poles is %d r/min', (mainsHz, poles, rpm) => {
  expect(synchronousHz(mainsHz, poles) * 60).toBeCloseTo(rpm, 9);
});

it('slip of the published cases: 1480 r/min is 1.3333 % at 50 Hz, 1770 is 1.6667 % at 60 Hz, 4 poles', () => {
  const slipPct = (mainsHz: number, rpm: number) => (1 - rpm / 60 / synchronousHz(mainsHz, 4)) * 100;
  expect(slipPct(50, 1480)).toBeCloseTo(1.3333, 4);
  expect(slipPct(60, 1770)).toBeCloseTo(1.6667, 4);
});

it('refuses poles that no motor has', () => {
  expect(() => synchronousHz(50, 3)).toThrow(RangeError);
  expect(() => synchronousHz(50, 0)).toThrow(RangeError);
});
