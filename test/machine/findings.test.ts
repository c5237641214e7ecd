import { describe, expect, test } from 'vitest';
import type { MachineEvidence, PointEvidence } from '../../src/machine/finding-evidence.ts';
import { findingsFor } from '../../src/machine/findings.ts';

// Thresholds: common practice, no source; sources of the frequencies are named where they are used.

function point(changes: Partial<PointEvidence>): PointEvidence {
  return {
    point: 'motor-de-h',
    direction: 'horizontal',
    part: 'motor',
    end: 'de',
    notable: true,
    overallMmS: 5,
    ordersMmS: [3, 0.9, 0.3],
    harmonicsMmS: 1,
    lowMmS: 0.3,
    twiceMainsMmS: 0.2,
    vanePassMmS: 0.2,
    bearing: null,
    ...changes,
  };
}

const axial = (overallMmS: number, changes: Partial<PointEvidence> = {}) =>
  point({ point: 'motor-de-a', direction: 'axial', notable: false, overallMmS, ...changes });

function machine(points: PointEvidence[], changes: Partial<MachineEvidence> = {}): MachineEvidence {
  return { points, supply: 'mains', mainsHz: 50, vanes: 6, ...changes };
}

const brief = (evidence: MachineEvidence) =>
  findingsFor(evidence).map(({ fault, likelihood }) => `${fault} ${likelihood}`);

describe('unbalance', () => {
  const shown = { overallMmS: 2.3, ordersMmS: [2.0, 0.4, 0.1] as const, harmonicsMmS: 0.5 };
  test('1x of 2.0 in 2.3 mm/s with little axial: likely, with the figures that say so', () => {
    const [finding, ...others] = findingsFor(machine([point(shown), axial(0.5)]));
    expect(others).toEqual([]);
    expect(finding).toMatchObject({ fault: 'unbalance', likelihood: 'likely', points: ['motor-de-h'] });
    expect(finding!.evidence).toEqual([
      '1x is 87 % of the overall velocity',
      '2x is 20 % of 1x',
      'axial is 22 % of radial',
    ]);
    expect(finding!.check).toMatch(/local procedure/);
  });
  test('without an axial reading only possible', () => {
    expect(brief(machine([point(shown)]))).toEqual(['unbalance possible']);
  });
  test('in zone A or B not worth saying', () => {
    expect(brief(machine([point({ ...shown, notable: false }), axial(0.5)]))).toEqual([]);
  });
  test('not with unknown orders', () => {
    expect(brief(machine([point({ ...shown, ordersMmS: [null, null, null] })]))).toEqual([]);
  });
});

describe('misalignment', () => {
  const shown = { ordersMmS: [3.5, 3, 0.6] as const, harmonicsMmS: 3.1 };
  test.each<[number, string[]]>([
    [4.5, ['misalignment likely']],
    [2.5, ['misalignment possible']],
    [1, []],
  ])('2x near 1x, axial %d mm/s of 5: %j', (axialMmS, found) => {
    expect(brief(machine([point(shown), axial(axialMmS)]))).toEqual(found);
  });
  test('strong axial at 1x alone is possible misalignment, and no unbalance', () => {
    const shaken = { ordersMmS: [4.8, 0.4, 0.1] as const };
    expect(brief(machine([point(shaken), axial(4.5)]))).toEqual(['misalignment possible']);
  });
});

describe('looseness', () => {
  const shown = { ordersMmS: [3, 2, 1.5] as const, harmonicsMmS: 3.5 };
  test.each<[number, string[]]>([
    [1, ['looseness likely']],
    [4, ['misalignment likely']],
  ])('many harmonics, axial %d mm/s of 5: %j', (axialMmS, found) => {
    expect(brief(machine([point(shown), axial(axialMmS)]))).toEqual(found);
  });
  test('axial unknown: both stay possible', () => {
    expect(brief(machine([point(shown)]))).toEqual(['misalignment possible', 'looseness possible']);
  });
});

describe('supply and flow', () => {
  // Twice line frequency is a usual motor component (handbooks).
  const hum = { overallMmS: 4.8, twiceMainsMmS: 2.6 };
  test('2.6 of 4.8 mm/s at twice the supply of a motor', () => {
    const [finding] = findingsFor(machine([point(hum)]));
    expect(finding).toMatchObject({ fault: 'electrical', likelihood: 'possible' });
    expect(finding!.evidence).toEqual([
      '100 Hz, twice the supply frequency, is 54 % of the overall velocity',
    ]);
  });
  test('not behind an inverter, not at the pump, not where it cannot be told from the shaft', () => {
    expect(brief(machine([point(hum)], { supply: 'inverter' }))).toEqual([]);
    expect(brief(machine([point({ ...hum, part: 'pump' })]))).toEqual([]);
    expect(brief(machine([point({ ...hum, twiceMainsMmS: null })]))).toEqual([]);
  });
  test.each<[number, string[]]>([
    [2, []],
    [2.6, ['vane-pass possible']],
    [3.6, ['vane-pass likely']],
  ])('vane pass %d of 5 mm/s: %j', (vanePassMmS, found) => {
    expect(brief(machine([point({ part: 'pump', vanePassMmS })]))).toEqual(found);
  });
  test('most of it below shaft speed at the pump', () => {
    expect(brief(machine([point({ part: 'pump', lowMmS: 3 })]))).toEqual(['flow-turbulence possible']);
  });
});

describe('bearings', () => {
  const line = {
    bearing: 'motor-de',
    expectedHz: 88.6,
    hz: 88.4,
    overFloorDb: 14.8,
    modulation: 0.6,
    harmonics: 3,
  };
  const calm = { notable: false, overallMmS: 1 };
  test('told in any zone, clear in one reading', () => {
    const [finding] = findingsFor(machine([point({ ...calm, bearing: { defect: 'outer', ...line } })]));
    expect(finding).toMatchObject({ fault: 'bearing-outer', likelihood: 'likely', points: ['motor-de-h'] });
    expect(finding!.evidence).toEqual([
      'motor-de-h: outer race line at 88.4 Hz, 14.8 dB over the floor, 3 harmonics of motor-de',
    ]);
  });
  test('a faint line at one point is possible, at two points likely', () => {
    const faint = { ...line, overFloorDb: 6, modulation: 0.3 };
    const one = point({ ...calm, bearing: { defect: 'inner', ...faint } });
    expect(brief(machine([one]))).toEqual(['bearing-inner possible']);
    expect(brief(machine([one, { ...one, point: 'motor-de-v' }]))).toEqual(['bearing-inner likely']);
  });
  test('two points that accuse different bearings do not bear each other out', () => {
    const faint = { ...line, overFloorDb: 6 };
    const one = point({ ...calm, bearing: { defect: 'inner', ...faint } });
    const other = point({
      ...calm,
      point: 'pump-de-h',
      bearing: { defect: 'inner', ...faint, bearing: 'pump-de' },
    });
    expect(findingsFor(machine([one, other]))).toMatchObject([
      { fault: 'bearing-inner', likelihood: 'possible', points: ['motor-de-h', 'pump-de-h'] },
    ]);
  });
  test('lines at the cage rate alone never get beyond possible, and say both', () => {
    const [finding] = findingsFor(machine([point({ ...calm, bearing: { defect: 'cage-rate', ...line } })]));
    expect(finding).toMatchObject({ fault: 'bearing-rolling-element', likelihood: 'possible' });
    expect(finding!.evidence.at(-1)).toBe('lines at the cage rate alone: a rolling element or the cage');
  });
});

test('a machine in zone A or B without a defect has nothing to tell, whatever its shape', () => {
  const shapes = [
    [0.9, 0.1, 0],
    [0.5, 0.5, 0.4],
    [0.1, 0.6, 0.6],
  ] as const;
  for (const ordersMmS of shapes) {
    const quiet = {
      notable: false,
      overallMmS: 1,
      ordersMmS,
      harmonicsMmS: 1,
      lowMmS: 1,
      vanePassMmS: 1,
      twiceMainsMmS: 1,
    };
    expect(findingsFor(machine([point(quiet), point({ ...quiet, part: 'pump' })]))).toEqual([]);
  }
});

test('likely ones first, and the same fault at motor and pump is one finding', () => {
  const unbalanced = { overallMmS: 2.3, ordersMmS: [2.2, 0.2, 0.1] as const };
  const pump = { part: 'pump', point: 'pump-de-h' } as const;
  const found = findingsFor(
    machine([
      point({ ...unbalanced, twiceMainsMmS: 1.3 }),
      point({ ...unbalanced, ...pump }),
      axial(0.4, { part: 'pump' }),
    ]),
  );
  expect(found.map(({ fault, likelihood }) => `${fault} ${likelihood}`)).toEqual([
    'unbalance likely',
    'electrical possible',
  ]);
  expect(found[0]!.points).toEqual(['motor-de-h', 'pump-de-h']);
});
