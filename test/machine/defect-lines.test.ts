import { describe, expect, it } from 'vitest';
import { knownSourceAt, withoutKnownSources } from '../../src/machine/evidence-lines.ts';
import { explain } from '../../src/machine/line-explanation.ts';

const race = { fundamental: 3.585, teeth: 3, sidebands: [1, 2], slip: 0.015 };

describe('knownSourceAt', () => {
  it('gives lines at multiples of the shaft and of other sources to them', () => {
    expect(knownSourceAt(60.6, 30, [], 0.4)).toBe(60);
    expect(knownSourceAt(107.5, 30, [], 0.4)).toBeNull();
    expect(knownSourceAt(200.5, 30, [100], 0.4)).toBe(200);
    expect(knownSourceAt(200.5, 30, [], 0.4)).toBeNull();
  });

  it('reaches as far as a line is wide', () => {
    expect(knownSourceAt(61.5, 30, [], 0.4)).toBeNull();
    expect(knownSourceAt(61.5, 30, [], 1.6)).toBe(60);
  });

  it('leaves room between the multiples of a slow shaft', () => {
    expect(knownSourceAt(10.2, 5, [], 0.1)).toBe(10);
    expect(knownSourceAt(10.4, 5, [], 0.1)).toBeNull();
  });
});

describe('withoutKnownSources', () => {
  it('drops what they explain and what lies below any cage', () => {
    const lines = [4, 11.9, 30, 60, 107.5, 200].map((hz) => ({ hz, depth: 0.5 }));
    const left = withoutKnownSources({ resolutionHz: 0.4, lines }, 30, [100]);
    expect(left.lines.map(({ hz }) => hz)).toEqual([11.9, 107.5]);
    expect(left.resolutionHz).toBe(0.4);
  });
});

describe('explain', () => {
  it('finds comb and slip', () => {
    const lines = [
      { hz: 107.6, depth: 0.8 },
      { hz: 215.2, depth: 0.6 },
    ];
    const e = explain({ resolutionHz: 0.4, lines }, race, 30);
    expect(e.teeth).toEqual([0.8, 0.6, 0]);
    expect(e.slip).toBeCloseTo(0.0005, 9);
    expect(e.energy).toBeCloseTo(1, 2);
    expect(e.share).toBeCloseTo(1, 2);
  });

  it('counts every line once and weighs it by where it sits', () => {
    // One line that is a tooth and, seen from the second tooth, a sideband.
    const comb = { fundamental: 2, teeth: 2, sidebands: [2], slip: 0 };
    const e = explain({ resolutionHz: 0.4, lines: [{ hz: 60, depth: 0.5 }] }, comb, 30);
    expect(e.energy).toBeCloseTo(0.25, 9);
    expect(e.side).toBe(0.5);
    const half = explain({ resolutionHz: 0.4, lines: [{ hz: 60.15, depth: 0.5 }] }, comb, 30);
    expect(half.energy).toBeCloseTo(0.25 * (1 - 0.25 * 0.25), 9);
    const out = explain({ resolutionHz: 0.4, lines: [{ hz: 60.31, depth: 0.5 }] }, comb, 30);
    expect(out.energy).toBe(0);
  });

  it('lets the comb and not a strong sideband say where it sits', () => {
    const lines = [
      { hz: 77, depth: 0.9 },
      { hz: 108.5, depth: 0.7 },
      { hz: 217, depth: 0.5 },
    ];
    const e = explain({ resolutionHz: 0.3, lines }, race, 30);
    expect(e.teeth.slice(0, 2)).toEqual([0.7, 0.5]);
  });

  it('counts companions without letting them place the comb', () => {
    const lines = [
      { hz: 12, depth: 0.5 },
      { hz: 107.6, depth: 0.5 },
    ];
    const alone = explain({ resolutionHz: 0.4, lines }, race, 30);
    expect(alone.share).toBeCloseTo(0.5, 2);
    const withCage = explain({ resolutionHz: 0.4, lines }, { ...race, companions: [0.4] }, 30);
    expect(withCage.share).toBeCloseTo(1, 2);
    expect(withCage.side).toBe(0);
  });

  it('explains nothing of nothing', () => {
    const e = explain({ resolutionHz: 0.4, lines: [] }, race, 30);
    expect(e).toEqual({ energy: 0, share: 0, slip: 0, teeth: [0, 0, 0], side: 0 });
  });
});
