/** Figures of the machine room against published standards, papers and data sheets, one entry a check. */
import { type BearingRates, bearingMultiples } from '../../src/machine/bearing.ts';
import { slip, synchronousHz, twiceMainsOffOrderHz } from '../../src/machine/electrical.ts';
import {
  alarmLimitFromBaseline,
  type SeverityChoice,
  type SeverityLimits,
  severityLimits,
  severityZone,
} from '../../src/machine/severity.ts';
import type { OutsideCheck } from './outside-checks.ts';

const PART_3 = 'ISO 10816-3:2009 Tables A.1, A.2';
const PART_7 = 'ISO 10816-7:2009 Table A.1';
type Row = readonly [id: string, source: string, choice: SeverityChoice, mmS: number[], um: number[] | null];

const part3 = (
  [
    [1, 'rigid', [2.3, 4.5, 7.1], [29, 57, 90]],
    [1, 'flexible', [3.5, 7.1, 11.0], [45, 90, 140]],
    [2, 'rigid', [1.4, 2.8, 4.5], [22, 45, 71]],
    [2, 'flexible', [2.3, 4.5, 7.1], [37, 71, 113]],
  ] as const
).map(([group, support, mmS, um]): Row => {
  const choice = { table: 'iso-10816-3', group, support } as const;
  return [`part-3.group-${group}.${support}`, PART_3, choice, [...mmS], [...um]];
});

const part7Table = [
  ['I', 200, [2.5, 4.0, 6.6], 5.0, 8.3],
  ['I', 201, [3.5, 5.0, 7.6], 6.3, 9.5],
  ['II', 200, [3.2, 5.1, 8.5], 6.4, 10.6],
  ['II', 201, [4.2, 6.1, 9.5], 7.6, 11.9],
] as const;
const part7Choice = (category: 'I' | 'II', ratedKw: number): SeverityChoice => ({
  table: 'iso-10816-7',
  category,
  ratedKw,
});
// Exactly 200 kW is in the lower column.
const part7 = part7Table.map(
  ([category, ratedKw, mmS]): Row => [
    `part-7.category-${category}.${ratedKw}-kw`,
    PART_7,
    part7Choice(category, ratedKw),
    [...mmS],
    null,
  ],
);

/**
 * Where the zone changes, found from outside by halving: the highest value that still belongs to the lower zone, which is
 * the boundary itself.
 */
function boundary(zoneAt: (value: number) => string, above: string): number {
  let [low, high] = [0, 1024];
  for (let i = 0; i < 60; i++) {
    const middle = (low + high) / 2;
    if (zoneAt(middle) >= above) high = middle;
    else low = middle;
  }
  return low;
}

function zoneOfVelocity(limits: SeverityLimits, mmS: number): string {
  return severityZone(mmS, 0, limits);
}

const ZONES = ['A', 'B', 'C', 'D'] as const;

const severityChecks = [...part3, ...part7].flatMap(([id, source, choice, mmS, um]): OutsideCheck[] => {
  const limits = severityLimits(choice);
  const row = { source, status: 'repro' as const };
  return ([0, 1, 2] as const).flatMap((index): OutsideCheck[] => {
    const name = `${id}.${ZONES[index]}/${ZONES[index + 1]}`;
    const above = ZONES[index + 1]!;
    const checks: OutsideCheck[] = [
      {
        ...row,
        id: `severity.${name}`,
        value: mmS[index]!,
        tolerance: 1e-9,
        unit: 'mm/s rms',
        measure: () => boundary((value) => zoneOfVelocity(limits, value), above),
      },
      {
        id: `severity.${name}.itself`,
        source: `${source}; a value on a boundary belongs to the lower zone (a library's reading)`,
        status: 'repro',
        value: index,
        tolerance: 0,
        unit: 'zones above A',
        measure: () => ZONES.indexOf(severityZone(mmS[index]!, um?.[index] ?? 0, limits)),
      },
    ];
    if (um !== null) {
      checks.push({
        ...row,
        id: `severity.${name}.displacement`,
        value: um[index]!,
        tolerance: 1e-9,
        unit: 'µm rms',
        measure: () => boundary((value) => severityZone(0, value, limits), above),
      });
    }
    return checks;
  });
});

const group2Rigid = severityLimits({ table: 'iso-10816-3', group: 2, support: 'rigid' });
const limitChecks: OutsideCheck[] = [
  ...(
    [
      ['alarm.baseline-0.9', 1.6, () => alarmLimitFromBaseline(0.9, group2Rigid), '5.4.1, group 2 rigid'],
      [
        'alarm.baseline-2.9',
        3.5,
        () => alarmLimitFromBaseline(2.9, group2Rigid),
        '5.4.1, capped at 1.25·B/C',
      ],
      ['trip.group-2-rigid', 5.625, () => group2Rigid.tripMaxMmS, '5.4.2, 1.25·C/D'],
    ] as const
  ).map(
    ([id, value, measure, clause]): OutsideCheck => ({
      id: `severity.${id}`,
      source: `ISO 10816-3:2009 ${clause}`,
      status: 'repro',
      value,
      tolerance: 1e-9,
      unit: 'mm/s rms',
      measure,
    }),
  ),
  ...part7Table.flatMap(([category, ratedKw, , alarm, trip]) =>
    (
      [
        ['alarm-max', alarm, 'alarmMaxMmS', 'velocityMmS', 1],
        ['trip-max', trip, 'tripMaxMmS', 'velocityMmS', 2],
      ] as const
    ).flatMap(([id, value, key, boundaries, index]): OutsideCheck[] => {
      const limits = severityLimits(part7Choice(category, ratedKw));
      const name = `severity.part-7.category-${category}.${ratedKw}-kw.${id}`;
      const row = { status: 'repro' as const, value, unit: 'mm/s rms' };
      return [
        { ...row, id: name, source: PART_7, tolerance: 1e-9, measure: () => limits[key] },
        {
          ...row,
          id: `${name}.by-rule`,
          source: `${PART_7}: the row is 1.25 × the boundary, rounded`,
          tolerance: 0.05 + 1e-9,
          measure: () => 1.25 * limits[boundaries][index],
        },
      ];
    }),
  ),
];

const MM = 25.4;
type Case = readonly [
  id: string,
  source: string,
  geometry: readonly [elements: number, elementIn: number, pitchIn: number, contactDeg: number],
  shaftHz: number,
  tolerance: number,
  published: Partial<BearingRates>,
];
/** Tolerance 5e-4 of multiples: the inches carry four figures; the last case is published to a tenth of a hertz. */
const bearingCases: Case[] = [
  [
    'cwru-6205',
    'Case Western Reserve University bearing data center, drive end 6205',
    [9, 0.3126, 1.537, 0],
    1,
    5e-4,
    { bpfi: 5.4152, bpfo: 3.5848, ftf: 0.39828, bsf: 4.7135 / 2 },
  ],
  [
    'cwru-6203',
    'Case Western Reserve University bearing data center, fan end 6203 (element diameter from memory)',
    [8, 0.2656, 1.122, 0],
    1,
    5e-4,
    { bpfi: 4.9469, bpfo: 3.053, ftf: 0.3817, bsf: 3.9874 / 2 },
  ],
  [
    'mfpt',
    'Society for Machinery Failure Prevention Technology bearing data, 25 Hz',
    [8, 0.235, 1.245, 0],
    25,
    25 * 5e-4,
    { bpfo: 81.125, bpfi: 118.875 },
  ],
  [
    'ims',
    'IMS bearing data, 2000 r/min',
    [16, 0.331, 2.815, 15.17],
    2000 / 60,
    0.05,
    { bpfo: 236.4, bpfi: 296.9, bsf: 139.9, ftf: 14.8 },
  ],
];

function ratesOf([elements, elementIn, pitchIn, contactDeg]: Case[2]): BearingRates {
  const geometry = { elementMm: elementIn * MM, pitchMm: pitchIn * MM, contactDeg };
  return bearingMultiples({ elements, geometry, multiples: null })!;
}

const bearingChecks = bearingCases.flatMap(([id, source, geometry, shaftHz, tolerance, published]) => {
  const [elements] = geometry;
  const identity = { source: 'kinematics of a rolling bearing (identity)', status: 'computed' as const };
  return [
    ...Object.entries(published).map(
      ([name, value]): OutsideCheck => ({
        id: `bearing.${id}.${name}`,
        source,
        status: 'seen',
        value,
        tolerance,
        unit: shaftHz === 1 ? 'x shaft' : 'Hz',
        measure: () => ratesOf(geometry)[name as keyof BearingRates] * shaftHz,
      }),
    ),
    {
      ...identity,
      id: `bearing.${id}.bpfo-is-n-ftf`,
      value: 0,
      tolerance: 1e-12,
      unit: 'x shaft',
      measure: () => ratesOf(geometry).bpfo - elements * ratesOf(geometry).ftf,
    },
    {
      ...identity,
      id: `bearing.${id}.bpfo-and-bpfi-are-n`,
      value: elements,
      tolerance: 1e-12,
      unit: 'x shaft',
      measure: () => ratesOf(geometry).bpfo + ratesOf(geometry).bpfi,
    },
  ];
});

const thumb = () => bearingMultiples({ elements: 8, geometry: null, multiples: null })!;
const thumbChecks = (
  [
    ['bpfo', 0.4 * 8],
    ['bpfi', 0.6 * 8],
    ['ftf', 0.4],
  ] as const
).map(
  ([name, value]): OutsideCheck => ({
    id: `bearing.rule-of-thumb.${name}`,
    source: '0.4·n, 0.6·n and 0.4 × shaft',
    status: 'practice',
    value,
    tolerance: 1e-12,
    unit: 'x shaft',
    measure: () => thumb()[name],
  }),
);

const ELECTRICAL = 'handbooks of electrical machines: 120·f/poles, (Ns−N)/Ns, poles × slip speed';
const electricalChecks: OutsideCheck[] = (
  [
    // Mains Hz, poles, r/min, synchronous r/min, slip %, pole pass Hz.
    [50, 4, 1480, 1500, 1.3333, 1.33333],
    [60, 4, 1770, 1800, 1.6667, 2.0],
  ] as const
).flatMap(([mainsHz, poles, rpm, synchronousRpm, slipPct, polePassHz]) => {
  const id = `motor.${mainsHz}-hz-${poles}-poles-${rpm}-rpm`;
  return [
    {
      id: `${id}.synchronous`,
      source: ELECTRICAL,
      status: 'seen' as const,
      value: synchronousRpm,
      tolerance: 1e-9,
      unit: 'r/min',
      measure: () => 60 * synchronousHz(mainsHz, poles),
    },
    {
      id: `${id}.slip`,
      source: ELECTRICAL,
      status: 'computed' as const,
      value: slipPct,
      tolerance: 5e-5,
      unit: '%',
      measure: () => 100 * slip(synchronousHz(mainsHz, poles), rpm / 60),
    },
    {
      id: `${id}.pole-pass`,
      source: ELECTRICAL,
      status: 'computed' as const,
      value: polePassHz,
      tolerance: 5e-6,
      unit: 'Hz',
      measure: () => twiceMainsOffOrderHz(mainsHz, rpm / 60),
    },
  ];
});

export const machineChecks: readonly OutsideCheck[] = [
  ...severityChecks,
  ...limitChecks,
  ...bearingChecks,
  ...thumbChecks,
  ...electricalChecks,
];
