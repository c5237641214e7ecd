import { describe, expect, it } from 'vitest';
import type { BearingRates } from '../../src/machine/bearing.ts';
import { judgeBearing } from '../../src/machine/defect-evidence.ts';
import type { BandLines, EnvelopeLine } from '../../src/machine/evidence-lines.ts';

// Drive-end bearing of the Case Western Reserve University bearing data center (published multiples).
const rates: BearingRates = { ftf: 0.39828, bsf: 2.35675, bpfo: 3.5848, bpfi: 5.4152 };
const shaftHz = 30;

/** Lines given in orders of the shaft, as [order, depth]. */
function band(lines: readonly (readonly [number, number])[], coarse = lines): BandLines {
  const of = (list: readonly (readonly [number, number])[]): EnvelopeLine[] =>
    list.map(([order, depth]) => ({ hz: order * shaftHz, depth })).sort((a, b) => a.hz - b.hz);
  return {
    bandHz: [500, 5000],
    fine: { resolutionHz: 0.35, lines: of(lines) },
    coarse: { resolutionHz: 1.4, lines: of(coarse) },
  };
}

function partOf(...bands: BandLines[]): string | null {
  return judgeBearing(bands, rates, shaftHz)?.part ?? null;
}

describe('judgeBearing', () => {
  it('names the outer race by its comb', () => {
    const lines = band([
      [3.5848, 0.8],
      [2 * 3.5848, 0.6],
    ]);
    const accusation = judgeBearing([lines], rates, shaftHz);
    expect(accusation?.part).toBe('outer');
    expect(accusation?.score).toBeCloseTo(1, 6);
    expect(accusation?.explanation.share).toBeCloseTo(1, 6);
  });

  it('names the inner race by its comb with sidebands of the shaft', () => {
    // Expected lines: McFadden and Smith 1984 (from memory).
    const lines = band([
      [5.4152, 0.9],
      [4.4152, 0.5],
      [6.4152, 0.5],
      [10.8304, 0.4],
      [9.8304, 0.2],
    ]);
    expect(partOf(lines)).toBe('inner');
  });

  it('names a rolling element by even multiples of its spin with sidebands of the cage, seen in short blocks', () => {
    const spin = 2 * rates.bsf;
    const lines: [number, number][] = [
      [spin, 0.6],
      [spin - rates.ftf, 0.35],
      [spin + rates.ftf, 0.35],
      [2 * spin, 0.3],
    ];
    expect(partOf(band([], lines))).toBe('rolling-element');
  });

  it('counts the cage lines of a rolling element as part of it', () => {
    // Without them the spin line explains a third of what is there.
    const lines: [number, number][] = [
      [2 * rates.bsf, 0.45],
      [4 * rates.bsf, 0.15],
      [2 * rates.ftf, 0.5],
      [1 - rates.ftf, 0.4],
    ];
    expect(partOf(band([], lines))).toBe('rolling-element');
    const others: [number, number][] = [...lines.slice(0, 2), [0.7, 0.5], [1.3, 0.4]];
    expect(partOf(band([], others))).toBeNull();
  });

  it('names the cage by its whole comb, and only its rate where that breaks off', () => {
    const { ftf } = rates;
    const comb: [number, number][] = [
      [ftf, 0.8],
      [2 * ftf, 0.7],
      [3 * ftf, 0.6],
      [4 * ftf, 0.5],
    ];
    expect(partOf(band(comb))).toBe('cage');
    expect(partOf(band(comb.slice(0, 2)))).toBe('cage-rate');
  });

  it('accepts slip of 1.4 % and not of 3 %', () => {
    // 1 to 2 % of slip is normal (Smith and Randall 2015, p. 102).
    const at = (slip: number) =>
      band([
        [3.5848 * (1 + slip), 0.8],
        [2 * 3.5848 * (1 + slip), 0.6],
      ]);
    expect(partOf(at(0.014))).toBe('outer');
    expect(partOf(at(-0.014))).toBe('outer');
    expect(partOf(at(0.03))).toBeNull();
  });

  it('leaves a shallow comb to levels and trends', () => {
    const at = (depth: number) =>
      band([
        [3.5848, depth],
        [2 * 3.5848, 0.8 * depth],
      ]);
    expect(partOf(at(0.56))).toBe('outer');
    expect(partOf(at(0.54))).toBeNull();
  });

  it('wants a harmonic of a race', () => {
    expect(partOf(band([[3.5848, 0.9]]))).toBeNull();
  });

  it('does not take a sideband for the tooth', () => {
    // A comb one order above BPFO, modulated once a turn.
    const lines = band([
      [4.5848, 1],
      [3.5848, 0.6],
      [5.5848, 0.6],
      [2 * 3.5848, 0.1],
    ]);
    expect(partOf(lines)).toBeNull();
  });

  it('does not take the second multiple of another source for a race', () => {
    const other = 3.5848 / 2;
    const lines: [number, number][] = [1, 2, 3, 4, 5, 6].map((h) => [h * other, 1 - 0.1 * h]);
    expect(partOf(band(lines))).toBeNull();
    expect(partOf(band(lines.filter((_, i) => i % 2 === 1)))).toBe('outer');
  });

  it('does not take a rate with sidebands of the shaft for a rolling element', () => {
    const spin = 2 * rates.bsf;
    const lines: [number, number][] = [
      [spin, 0.8],
      [spin - 1, 0.7],
      [spin + 1, 0.7],
      [2 * spin, 0.5],
      [2 * spin - 1, 0.4],
      [2 * spin + 1, 0.4],
    ];
    expect(partOf(band([], lines))).toBeNull();
  });

  it('names nothing where most of the modulation is something else', () => {
    const strange: [number, number][] = [0.73, 1.21, 2.31, 4.13, 6.67].map((order) => [order, 0.7]);
    expect(partOf(band([[3.5848, 0.6], [2 * 3.5848, 0.3], ...strange]))).toBeNull();
  });

  it('takes the best band, and names nothing where another part comes close in another band', () => {
    const outer = band([
      [3.5848, 0.8],
      [2 * 3.5848, 0.6],
    ]);
    const inner = (scale: number) =>
      band([
        [5.4152, 0.8 * scale],
        [2 * 5.4152, 0.6 * scale],
      ]);
    expect(
      partOf(
        band([
          [3.5848, 0.6],
          [7.1696, 0.1],
          [2.2, 0.4],
        ]),
        outer,
      ),
    ).toBe('outer');
    expect(partOf(outer, inner(0.9))).toBeNull();
    expect(partOf(outer, inner(1.8))).toBe('inner');
  });

  it('names nothing without lines', () => {
    expect(partOf(band([]))).toBeNull();
    expect(judgeBearing([], rates, shaftHz)).toBeNull();
  });
});
