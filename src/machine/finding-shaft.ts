/** Faults that show at multiples of shaft speed: unbalance, misalignment, looseness. */

import { CAUTION, type Finding, type PointEvidence, percent } from './finding-evidence.ts';

/** All thresholds of this page: common practice, no source. Shares of RMS velocity. */
const UNBALANCE = { first: 0.8, secondOfFirst: 0.3, axialOfRadial: 0.5 } as const;
const MISALIGNMENT = { secondOfFirst: 0.5, axialOfRadial: 0.7, orders: 0.7 } as const;
const LOOSENESS = { harmonicsOfFirst: 0.7, second: 0.3, third: 0.25, axialOfRadial: 0.3 } as const;

interface Orders {
  readonly point: PointEvidence;
  readonly overall: number;
  readonly first: number;
  readonly second: number;
  readonly third: number;
}

/** Axial over the strongest radial on the same part and end; null: not both measured. */
interface Axial {
  readonly ratio: number;
  readonly axial: PointEvidence;
}

/**
 * Names what the orders of the shaft speak for, part by part (motor, pump, …), from its notable points.
 *
 * Sources: axial under about 30 % of radial with harmonics suggests looseness, axial similar or higher suggests
 * misalignment, 1× alone in radial direction suggests unbalance: common practice, no source.
 *
 * Worked: 1× 2.0 of 2.3 mm/s overall is 87 %; with 2× at 0.4 and axial 0.5 mm/s (22 %): unbalance, likely.
 */
export function shaftFindings(points: readonly PointEvidence[]): Finding[] {
  const parts = [...new Set(points.map((point) => point.part))];
  return parts.flatMap((part) => {
    const here = points.filter((point) => point.part === part);
    const orders = here
      .filter((point) => point.notable)
      .map(ordersOf)
      .filter((found) => found !== null);
    const axial = axialRatio(here);
    return [unbalance(orders, axial), misalignment(orders, axial), looseness(orders, axial)].filter(
      (finding) => finding !== null,
    );
  });
}

function ordersOf(point: PointEvidence): Orders | null {
  const [first, second, third] = point.ordersMmS;
  const { overallMmS: overall } = point;
  if (overall === null || !(overall > 0) || first === null || second === null || third === null) return null;
  return { point, overall, first, second, third };
}

function axialRatio(points: readonly PointEvidence[]): Axial | null {
  const measured = points.filter((point) => point.overallMmS !== null && point.overallMmS > 0);
  const strongest = (of: PointEvidence[]) => of.sort((a, b) => b.overallMmS! - a.overallMmS!)[0];
  const axial = strongest(measured.filter((point) => point.direction === 'axial'));
  const radial = strongest(measured.filter((point) => point.direction !== 'axial'));
  if (axial === undefined || radial === undefined) return null;
  return { ratio: axial.overallMmS! / radial.overallMmS!, axial };
}

function axialSentence({ ratio }: Axial): string {
  return `axial is ${percent(ratio, 1)} of radial`;
}

const notMeasured = 'axial is not measured on this part';

function unbalance(orders: readonly Orders[], axial: Axial | null): Finding | null {
  const speaking = orders.filter(
    ({ point, overall, first, second }) =>
      point.direction !== 'axial' &&
      first >= UNBALANCE.first * overall &&
      second < UNBALANCE.secondOfFirst * first,
  );
  const [top] = byOverall(speaking);
  if (top === undefined || (axial !== null && axial.ratio >= MISALIGNMENT.axialOfRadial)) return null;
  return {
    fault: 'unbalance',
    likelihood: axial !== null && axial.ratio < UNBALANCE.axialOfRadial ? 'likely' : 'possible',
    points: ids(speaking),
    evidence: [
      `1x is ${percent(top.first, top.overall)} of the overall velocity`,
      `2x is ${percent(top.second, top.first)} of 1x`,
      axial === null ? notMeasured : axialSentence(axial),
    ],
    check: `Look for deposits, wear or something caught in the rotor, then have it balanced. ${CAUTION}`,
  };
}

function misalignment(orders: readonly Orders[], axial: Axial | null): Finding | null {
  const explained = ({ overall, first, second, third }: Orders) =>
    Math.hypot(first, second, third) >= MISALIGNMENT.orders * overall;
  const second = orders.filter(
    (o) => explained(o) && o.second >= MISALIGNMENT.secondOfFirst * o.first && o.second > o.third,
  );
  const pushes = axial !== null && axial.ratio >= MISALIGNMENT.axialOfRadial;
  // Without a strong 2×, a strong axial vibration must be at shaft orders itself.
  const speaking = second.length > 0 ? second : pushes ? orders.filter(explained) : [];
  const [top] = byOverall(speaking);
  if (top === undefined) return null;
  const quietAxially = axial !== null && axial.ratio < LOOSENESS.axialOfRadial;
  if (quietAxially) return null;
  return {
    fault: 'misalignment',
    likelihood: pushes && second.length > 0 ? 'likely' : 'possible',
    points: ids(speaking),
    evidence: [
      `2x is ${percent(top.second, top.first)} of 1x`,
      axial === null ? notMeasured : axialSentence(axial),
    ],
    check: `Check the coupling and its alignment, pipe strain and soft feet. ${CAUTION}`,
  };
}

function looseness(orders: readonly Orders[], axial: Axial | null): Finding | null {
  const speaking = orders.filter(
    ({ point, first, second, third }) =>
      point.direction !== 'axial' &&
      point.harmonicsMmS !== null &&
      point.harmonicsMmS >= LOOSENESS.harmonicsOfFirst * first &&
      second >= LOOSENESS.second * first &&
      third >= LOOSENESS.third * first,
  );
  const [top] = byOverall(speaking);
  if (top === undefined || (axial !== null && axial.ratio >= MISALIGNMENT.axialOfRadial)) return null;
  return {
    fault: 'looseness',
    likelihood: axial !== null && axial.ratio < LOOSENESS.axialOfRadial ? 'likely' : 'possible',
    points: ids(speaking),
    evidence: [
      `the harmonics are ${percent(top.point.harmonicsMmS!, top.first)} of 1x`,
      `3x is ${percent(top.third, top.first)} of 1x`,
      axial === null ? notMeasured : axialSentence(axial),
    ],
    check: `Check holding-down bolts, feet, grout and bearing fits. ${CAUTION}`,
  };
}

function byOverall(orders: readonly Orders[]): Orders[] {
  return [...orders].sort((a, b) => b.overall - a.overall);
}

function ids(orders: readonly Orders[]): string[] {
  return orders.map(({ point }) => point.point);
}
