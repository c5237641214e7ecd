/** Defects of rolling bearings, from what the envelope accuses. */

import {
  type BearingEvidence,
  CAUTION,
  type FaultName,
  type Finding,
  type PointEvidence,
} from './finding-evidence.ts';

/** From here on a line is beyond doubt in one reading. Common practice, no source. */
const CLEAR = { overFloorDb: 10, harmonics: 2, modulation: 0.5 } as const;

const FAULT: Readonly<Record<BearingEvidence['defect'], FaultName>> = {
  outer: 'bearing-outer',
  inner: 'bearing-inner',
  'rolling-element': 'bearing-rolling-element',
  cage: 'bearing-cage',
  // Lines at the cage rate alone come of a rolling element as well as of the cage.
  'cage-rate': 'bearing-rolling-element',
};

const NAME: Readonly<Record<BearingEvidence['defect'], string>> = {
  outer: 'outer race',
  inner: 'inner race',
  'rolling-element': 'rolling element',
  cage: 'cage',
  'cage-rate': 'cage rate',
};

/**
 * Names bearing defects, whatever the zone: the envelope speaks long before the velocity does. `likely` where a line
 * is beyond doubt or two points accuse the same part of the same bearing.
 *
 * Source of the frequencies: see bearing kinematics; that these lines accuse: squared envelope analysis (Randall and
 * Antoni 2011). What counts as beyond doubt: common practice, no source.
 *
 * Worked: an outer race line at 88.4 Hz, 14.8 dB over the floor, modulation 0.6, 3 harmonics: bearing-outer, likely.
 */
export function bearingFindings(points: readonly PointEvidence[]): Finding[] {
  const accused = points.flatMap((point) =>
    point.bearing === null ? [] : [{ point, evidence: point.bearing }],
  );
  const keys = new Set(accused.map(({ evidence }) => keyOf(evidence)));
  return [...keys].map((key): Finding => {
    const group = accused.filter(({ evidence }) => keyOf(evidence) === key);
    const named = group[0]!.evidence.bearing === null ? '' : ` of ${group[0]!.evidence.bearing}`;
    const ambiguous = group.every(({ evidence }) => evidence.defect === 'cage-rate');
    return {
      fault: FAULT[group[0]!.evidence.defect],
      likelihood: !ambiguous && (group.length > 1 || isClear(group[0]!.evidence)) ? 'likely' : 'possible',
      points: group.map(({ point }) => point.point),
      evidence: [
        ...group.map(({ point, evidence }) => `${point.point}: ${sentence(evidence)}${named}`),
        ...(ambiguous ? ['lines at the cage rate alone: a rolling element or the cage'] : []),
      ],
      check:
        'Compare the envelope with earlier readings and look at lubrication and temperature; plan the bearing if it grows. ' +
        CAUTION,
    };
  });
}

function keyOf({ defect, bearing }: BearingEvidence): string {
  return `${FAULT[defect]} ${bearing ?? ''}`;
}

function isClear({ overFloorDb, harmonics, modulation }: BearingEvidence): boolean {
  if (overFloorDb === null || modulation === null) return false;
  return overFloorDb >= CLEAR.overFloorDb && harmonics >= CLEAR.harmonics && modulation >= CLEAR.modulation;
}

function sentence({ defect, hz, expectedHz, overFloorDb, harmonics }: BearingEvidence): string {
  const at = hz === null ? `expected at ${expectedHz.toFixed(1)} Hz` : `at ${hz.toFixed(1)} Hz`;
  const over = overFloorDb === null ? '' : `, ${overFloorDb.toFixed(1)} dB over the floor`;
  return `${NAME[defect]} line ${at}${over}, ${harmonics} harmonic${harmonics === 1 ? '' : 's'}`;
}
