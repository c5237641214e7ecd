/** Which part of a rolling bearing the envelope lines accuse, if any. */
import type { BandLines } from './evidence-lines.ts';
import { type Comb, type Explanation, explain } from './line-explanation.ts';

export type Defect = 'outer' | 'inner' | 'rolling-element' | 'cage' | 'cage-rate';
export interface Multiples {
  readonly ftf: number;
  readonly bsf: number;
  readonly bpfo: number;
  readonly bpfi: number;
}
export interface Candidate {
  readonly part: Defect;
  readonly score: number;
  readonly bandHz: readonly [number, number];
  readonly fit: Explanation;
}

export const R = {
  slip: 0.015,
  slipEl: 0.025,
  c1: 0.5,
  share: 0.25,
  sideR: 0.9,
  cageC1: 0.45,
  cageShare: 0.5,
  c4: 0.3,
  elC1: 0.3,
  elShare: 0.45,
  elShareSide: 0.6,
  elOver: 1.3,
  margin: 1.5,
  sideMin: 0,
};

function combs(m: Multiples): { outer: Comb; inner: Comb; element: Comb; cage: Comb } {
  return {
    outer: { fundamental: m.bpfo, teeth: 3, sidebands: [1, 2], slip: R.slip },
    inner: { fundamental: m.bpfi, teeth: 3, sidebands: [1, 2], slip: R.slip },
    element: { fundamental: 2 * m.bsf, teeth: 3, sidebands: [m.ftf, 2 * m.ftf, 1 - m.ftf], slip: R.slipEl },
    cage: { fundamental: m.ftf, teeth: 10, sidebands: [], slip: R.slip },
  };
}

export function candidatesOf(band: BandLines, m: Multiples, shaftHz: number): Candidate[] {
  const c = combs(m);
  const found: Candidate[] = [];
  const add = (part: Defect, fit: Explanation): void => {
    found.push({ part, score: Math.sqrt(fit.energy) * fit.share, bandHz: band.bandHz, fit });
  };
  for (const part of ['outer', 'inner'] as const) {
    const fit = explain(band.fine, c[part], shaftHz);
    const [c1 = 0, c2 = 0, c3 = 0] = fit.teeth;
    if (c1 >= R.c1 && (c2 > 0 || c3 > 0) && fit.share >= R.share && c1 >= R.sideR * fit.side) add(part, fit);
  }
  {
    const fit = explain(band.fine, c.cage, shaftHz);
    const [c1 = 0, c2 = 0, c3 = 0, c4 = 0] = fit.teeth;
    if (c1 >= R.cageC1 && (c2 > 0 || c3 > 0) && fit.share >= R.cageShare) {
      add(c2 > 0 && c3 > 0 && c4 >= R.c4 * c1 ? 'cage' : 'cage-rate', fit);
    }
  }
  {
    const fit = explain(band.coarse, c.element, shaftHz);
    const [c1 = 0, c2 = 0, c3 = 0] = fit.teeth;
    const races = (['outer', 'inner'] as const)
      .map((p) => explain(band.coarse, c[p], shaftHz))
      .filter((f) => f.teeth[0]! > 0);
    if (
      c1 >= R.elC1 &&
      c1 >= R.sideR * fit.side &&
      ((fit.share >= R.elShare && (c2 > 0 || c3 > 0)) ||
        (fit.share >= R.elShareSide && fit.side > R.sideMin)) &&
      races.every((r) => fit.energy >= R.elOver * r.energy)
    )
      add('rolling-element', fit);
  }
  return found;
}

export interface BearingVerdict {
  readonly defect: Defect | null;
  readonly score: number;
  readonly candidates: readonly Candidate[];
}
export function judgeBearing(bands: readonly BandLines[], m: Multiples, shaftHz: number): BearingVerdict {
  const all = bands.flatMap((b) => candidatesOf(b, m, shaftHz)).sort((a, b) => b.score - a.score);
  const top = all[0];
  if (!top) return { defect: null, score: 0, candidates: all };
  const rival = all.find((x) => x.part !== top.part);
  return {
    defect: rival && top.score < R.margin * rival.score ? null : top.part,
    score: top.score,
    candidates: all,
  };
}
