import { describe, expect, it } from 'vitest';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import {
  coherentGain,
  enbwBins,
  lineSpreadBins2,
  mainLobeHalfWidthBins,
  makeWindow,
  type WindowName,
  windowResponse,
} from '../../src/signal/window.ts';
import { decibels } from './support.ts';

/** |Σ w·exp(−2πi·d·n/N)| straight from the definition. */
function transformAt(window: Float64Array, offsetBins: number): number {
  let re = 0;
  let im = 0;
  for (let i = 0; i < window.length; i++) {
    const angle = (2 * Math.PI * offsetBins * i) / window.length;
    re += window[i]! * Math.cos(angle);
    im -= window[i]! * Math.sin(angle);
  }
  return Math.hypot(re, im);
}

function overlapCorrelation(window: Float64Array, overlap: number): number {
  const hop = Math.round(window.length * (1 - overlap));
  let product = 0;
  let power = 0;
  for (let i = 0; i < window.length; i++) {
    power += window[i]! ** 2;
    if (i >= hop) product += window[i]! * window[i - hop]!;
  }
  return product / power;
}

// Periodic windows of 4096 samples, computed with a general-purpose library; Harris 1978, Proc. IEEE 66(1), Table I
// (from memory) rounds to the first two rows. The flat top's coefficients are those of ISO 18431-2:2004.
const table: {
  name: WindowName;
  gain: number;
  peak: number;
  enbw: number;
  scallopDb: number;
  sideLobeDb: number;
  overlap50: number;
  overlap75: number;
}[] = [
  {
    name: 'rectangular',
    gain: 1,
    peak: 1,
    enbw: 1,
    scallopDb: -3.9224,
    sideLobeDb: -13.26,
    overlap50: 0.5,
    overlap75: 0.75,
  },
  {
    name: 'hann',
    gain: 0.5,
    peak: 1,
    enbw: 1.5,
    scallopDb: -1.4236,
    sideLobeDb: -31.47,
    overlap50: 0.1667,
    overlap75: 0.6592,
  },
  {
    name: 'flat-top',
    gain: 1,
    peak: 1 / 0.2156,
    enbw: 3.7709,
    scallopDb: -0.009,
    sideLobeDb: -83.9,
    overlap50: -0.015,
    overlap75: 0.046,
  },
];

describe.each(table)('the $name window', (row) => {
  const window = makeWindow(row.name, 4096);

  it('has the published gain, peak and noise bandwidth', () => {
    expect(coherentGain(window)).toBeCloseTo(row.gain, 10);
    expect(Math.max(...window) / row.peak).toBeCloseTo(1, 3);
    expect(enbwBins(window)).toBeCloseTo(row.enbw, 4);
  });

  it('loses as much between two lines as published', () => {
    expect(decibels(windowResponse(row.name, 0.5))).toBeCloseTo(row.scallopDb, 4);
    expect(decibels(transformAt(window, 0.5) / transformAt(window, 0))).toBeCloseTo(row.scallopDb, 4);
  });

  it('has its highest side lobe where the main lobe is said to end, at the published level', () => {
    const half = mainLobeHalfWidthBins(row.name);
    expect(transformAt(window, half) / transformAt(window, 0)).toBeLessThan(1e-9);
    let highest = 0;
    for (let d = half; d < half + 12; d += 0.01) highest = Math.max(highest, windowResponse(row.name, d));
    expect(decibels(highest)).toBeCloseTo(row.sideLobeDb, 1);
  });

  it('correlates with itself as published at 50 and 75 % overlap', () => {
    expect(overlapCorrelation(window, 0.5)).toBeCloseTo(row.overlap50, 3);
    expect(overlapCorrelation(window, 0.75)).toBeCloseTo(row.overlap75, 3);
  });

  it('has the closed-form response of its samples', () => {
    for (const d of [0, 0.3, 1.25, 2.5, 4.75, 7.5]) {
      expect(windowResponse(row.name, d)).toBeCloseTo(transformAt(window, d) / transformAt(window, 0), 6);
    }
    expect(windowResponse(row.name, -1.25)).toBe(windowResponse(row.name, 1.25));
  });

  it('is periodic: the sample after the last would be the first', () => {
    const longer = makeWindow(row.name, 8);
    for (let i = 1; i < 8; i++) expect(longer[i]).toBeCloseTo(longer[8 - i]!, 14);
  });
});

it('gives the worked example of the Hann window', () => {
  const worked = [0, 0.5, 1, 0.5];
  makeWindow('hann', 4).forEach((v, i) => {
    expect(v).toBeCloseTo(worked[i]!, 15);
  });
});

it.each(['hann', 'flat-top'] as const)(
  'gives the spread of a %s line as the second moment of its transform',
  (name) => {
    const window = makeWindow(name, 64);
    let moment = 0;
    let power = 0;
    for (let k = -8; k <= 8; k++) {
      moment += k * k * transformAt(window, k) ** 2;
      power += transformAt(window, k) ** 2;
    }
    expect(lineSpreadBins2(name)).toBeCloseTo(moment / power, 10);
  },
);

it('makes no allowance for the rectangular window, and a third of a bin squared for Hann', () => {
  expect(lineSpreadBins2('rectangular')).toBe(0);
  expect(lineSpreadBins2('hann')).toBeCloseTo(1 / 3, 14);
});

it.each([0, -1, 2.5, Number.NaN])('refuses a window of %d samples', (n) => {
  expect(() => makeWindow('hann', n)).toThrow(SignalRangeError);
});
