/** Faults that come with the water or the supply: vane pass, turbulence, electrical. */

import {
  CAUTION,
  type Finding,
  type MachineEvidence,
  type PointEvidence,
  percent,
} from './finding-evidence.ts';

/** Shares of the overall velocity. Common practice, no source. */
const MAIN_SHARE = 0.5;
const STRONG_SHARE = 0.7;

interface Shared {
  readonly point: PointEvidence;
  readonly part: number;
  readonly overall: number;
}

function sharing(
  points: readonly PointEvidence[],
  figure: (point: PointEvidence) => number | null,
  share: number,
): Shared[] {
  return points
    .map((point) => ({ point, part: figure(point), overall: point.overallMmS }))
    .filter((one): one is Shared => one.part !== null && one.overall !== null && one.overall > 0)
    .filter(({ part, overall }) => part >= share * overall)
    .sort((a, b) => b.overall - a.overall);
}

/**
 * Names what twice the supply frequency, the vane passing frequency and the range below shaft speed speak for, from
 * notable points.
 *
 * Sources: vane pass is vanes × speed, twice line frequency is a usual motor component (handbooks); that a component
 * which vanishes at once with the power is electrical, and the shares: common practice, no source. An electrical fault
 * stays `possible`: only switching off tells.
 *
 * Worked: 2.6 mm/s at 100 Hz of 4.8 mm/s overall at a motor on 50 Hz mains is 54 %: electrical, possible.
 */
export function flowAndSupplyFindings({ points, supply, mainsHz, vanes }: MachineEvidence): Finding[] {
  const notable = points.filter((point) => point.notable);
  const found: Finding[] = [];
  const motor = notable.filter((point) => point.part === 'motor');
  const [humming, ...others] = supply === 'mains' ? sharing(motor, (p) => p.twiceMainsMmS, MAIN_SHARE) : [];
  if (humming !== undefined) {
    found.push({
      fault: 'electrical',
      likelihood: 'possible',
      points: ids([humming, ...others]),
      evidence: [
        `${2 * mainsHz} Hz, twice the supply frequency, is ${percent(humming.part, humming.overall)} of the overall velocity`,
      ],
      check:
        'See whether it vanishes at once when the power is switched off; then have currents, windings and air gap ' +
        `checked. ${CAUTION}`,
    });
  }
  const pump = notable.filter((point) => point.part === 'pump');
  const [passing, ...morePassing] = sharing(pump, (p) => p.vanePassMmS, MAIN_SHARE);
  if (passing !== undefined && vanes !== null) {
    found.push({
      fault: 'vane-pass',
      likelihood: passing.part >= STRONG_SHARE * passing.overall ? 'likely' : 'possible',
      points: ids([passing, ...morePassing]),
      evidence: [
        `${vanes}x, the vane pass, is ${percent(passing.part, passing.overall)} of the overall velocity`,
      ],
      check: `Compare the duty point with the pump curve; look for a partly closed valve or a blocked impeller. ${CAUTION}`,
    });
  }
  const [swirling, ...more] = sharing(pump, (p) => p.lowMmS, MAIN_SHARE);
  if (swirling !== undefined) {
    found.push({
      fault: 'flow-turbulence',
      likelihood: 'possible',
      points: ids([swirling, ...more]),
      evidence: [
        `what lies below shaft speed is ${percent(swirling.part, swirling.overall)} of the overall velocity`,
      ],
      check:
        'Compare the flow with the range that the pump is made for; look at the suction level, air and valves.',
    });
  }
  return found;
}

function ids(shared: readonly Shared[]): string[] {
  return shared.map(({ point }) => point.point);
}
