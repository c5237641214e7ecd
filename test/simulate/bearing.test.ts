import { describe, expect, it } from 'vitest';
import { bearingMultiples } from '../../src/machine/bearing.ts';
import { type DefectSettings, loadAt, slippingMultiple } from '../../src/simulate/bearing.ts';
import { SimulatedMachine } from '../../src/simulate/machine.ts';
import { lineAt } from './dft.ts';

const rateHz = 25_600;
const shaftHz = 25;
// MFPT bearing fault data: 8 elements of 0.235 in on 1.245 in; published BPFO 81.125 and BPFI 118.875 Hz at 25 Hz,
// FTF 10.1406 and BSF 63.864 Hz by the same formulas.
const published = { bpfo: 81.125, bpfi: 118.875, ftf: 10.1406, bsf: 63.864 };
const multiples = bearingMultiples({
  elements: 8,
  geometry: { elementMm: 0.235 * 25.4, pitchMm: 1.245 * 25.4, contactDeg: 0 },
  multiples: null,
})!;

function rung(defect: Omit<DefectSettings, 'multiples'>, seconds = 8): Float64Array {
  const machine = new SimulatedMachine(
    {
      seed: 3,
      shaft: { mainsHz: 60, poles: 4, ratedRpm: 1500 },
      vanes: 6,
      sources: {},
      defects: [{ multiples, ...defect }],
      points: ['horizontal'],
    },
    rateHz,
  );
  const x = new Float64Array(seconds * rateHz);
  machine.fill([x], x.length);
  return x;
}

/** The squared signal over its mean, less 1: its lines are the depth of the modulation of the power. */
function power(x: Float64Array): Float64Array {
  const squared = x.map((v) => v * v);
  const mean = squared.reduce((sum, v) => sum + v, 0) / squared.length;
  return squared.map((v) => v / mean - 1);
}

/** Times at which the ringing starts anew, from jumps of the short-time power. */
function onsets(x: Float64Array): number[] {
  const found: number[] = [];
  let slow = 0;
  for (let i = 0; i < x.length; i++) {
    const now = x[i]! * x[i]!;
    const last = found.at(-1);
    if (now > 0.05 && now > 20 * slow && (last === undefined || i / rateHz - last > 0.005))
      found.push(i / rateHz);
    slow = 0.98 * slow + 0.02 * now;
  }
  return found;
}

describe('a bearing defect', () => {
  it('of the outer race rings at the published rate, without sidebands of the shaft', () => {
    const p = power(rung({ part: 'outer', impactG: 2, slipPct: 0, randomSlipPct: 0 }));
    expect(lineAt(p, rateHz, published.bpfo).amplitude).toBeGreaterThan(1);
    expect(lineAt(p, rateHz, 2 * published.bpfo).amplitude).toBeGreaterThan(0.8);
    expect(lineAt(p, rateHz, published.bpfo + shaftHz).amplitude).toBeLessThan(0.06);
    expect(lineAt(p, rateHz, published.bpfi).amplitude).toBeLessThan(0.06);
  });

  it('of the inner race is weighted by the load zone: sidebands at ± the shaft speed', () => {
    const p = power(rung({ part: 'inner', impactG: 2, slipPct: 0, randomSlipPct: 0 }));
    const centre = lineAt(p, rateHz, published.bpfi).amplitude;
    expect(centre).toBeGreaterThan(0.8);
    for (const side of [-shaftHz, shaftHz]) {
      const ratio = lineAt(p, rateHz, published.bpfi + side).amplitude / centre;
      expect(ratio).toBeGreaterThan(0.3);
      expect(ratio).toBeLessThan(1);
    }
    expect(lineAt(p, rateHz, shaftHz).amplitude).toBeGreaterThan(0.5);
  });

  it('of a rolling element strikes at twice BSF, weighted as the cage turns', () => {
    const p = power(rung({ part: 'rolling-element', impactG: 2, slipPct: 0, randomSlipPct: 0 }));
    const centre = lineAt(p, rateHz, 2 * published.bsf).amplitude;
    expect(centre).toBeGreaterThan(0.7);
    for (const side of [-published.ftf, published.ftf]) {
      expect(lineAt(p, rateHz, 2 * published.bsf + side).amplitude / centre).toBeGreaterThan(0.3);
    }
    expect(lineAt(p, rateHz, published.ftf).amplitude).toBeGreaterThan(0.5);
  });

  it('of the cage shows at FTF with many harmonics', () => {
    const p = power(rung({ part: 'cage', impactG: 2, slipPct: 0, randomSlipPct: 0 }));
    for (let h = 1; h <= 4; h++) expect(lineAt(p, rateHz, h * published.ftf).amplitude).toBeGreaterThan(0.8);
  });

  it('slips by the percentage given, with intervals that scatter by 1 %', () => {
    const starts = onsets(rung({ part: 'outer', impactG: 2, slipPct: 1.5, randomSlipPct: 1 }, 20));
    const intervals = starts.slice(1).map((at, k) => at - starts[k]!);
    const mean = intervals.reduce((sum, s) => sum + s, 0) / intervals.length;
    const spread = Math.sqrt(intervals.reduce((sum, s) => sum + (s - mean) ** 2, 0) / (intervals.length - 1));
    expect(intervals.length).toBeGreaterThan(1500);
    // Standard error of the mean of 1600 intervals: 0.025 %.
    expect(Math.abs(1 / mean / (0.985 * published.bpfo) - 1)).toBeLessThan(0.001);
    expect(Math.abs(spread / mean - 0.01)).toBeLessThan(0.002);
  });

  it('keeps what kinematics demands when the cage slips: BPFO + BPFI = elements × speed, BPFO = elements × FTF', () => {
    for (const slip of [0, 0.01, 0.02]) {
      const rate = (part: DefectSettings['part']) => slippingMultiple(multiples, part, slip);
      expect(rate('outer') + rate('inner')).toBeCloseTo(8, 9);
      expect(rate('outer')).toBeCloseTo(8 * rate('cage'), 9);
    }
    expect(shaftHz * slippingMultiple(multiples, 'rolling-element', 0)).toBeCloseTo(2 * published.bsf, 2);
  });

  it('carries load over half the circle: 1 at its middle, (1 − (1 − cos ψ)/2ε)^1.5 with ε = 0.5, 0 behind', () => {
    // Stribeck's distribution, exponent 1.5 for balls (Harris, Rolling Bearing Analysis, from memory).
    expect(loadAt(0)).toBe(1);
    expect(loadAt(Math.PI / 3)).toBeCloseTo(0.353553, 6);
    expect(loadAt((2 * Math.PI) / 3)).toBe(0);
    expect(loadAt(Math.PI)).toBe(0);
  });

  it('worsens along its curve, from nothing', () => {
    const x = rung({
      part: 'outer',
      impactG: [
        [2, 0],
        [6, 3],
      ],
    });
    const peak = (from: number, to: number) =>
      x.subarray(from * rateHz, to * rateHz).reduce((most, v) => Math.max(most, Math.abs(v)), 0);
    expect(peak(0, 2)).toBe(0);
    expect(peak(3, 4)).toBeGreaterThan(0.5);
    expect(peak(7, 8) / peak(3.5, 4)).toBeGreaterThan(1.5);
  });
});
