import { describe, expect, it } from 'vitest';
import {
  alarmLimitFromBaseline,
  type SeverityChoice,
  type SeverityPlace,
  severityApplies,
  severityLimits,
  severityZone,
  zoneOf,
} from '../../src/machine/severity.ts';

type Row = readonly [choice: SeverityChoice, mmS: readonly number[], um: readonly number[] | null];

// ISO 10816-3:2009 Tables A.1 and A.2, as reproduced in agreeing copies; ISO 20816-3:2022 has the same velocities.
const part3: Row[] = (['iso-10816-3', 'iso-20816-3'] as const).flatMap((table): Row[] => [
  [{ table, group: 1, support: 'rigid' }, [2.3, 4.5, 7.1], [29, 57, 90]],
  [{ table, group: 1, support: 'flexible' }, [3.5, 7.1, 11.0], [45, 90, 140]],
  [{ table, group: 2, support: 'rigid' }, [1.4, 2.8, 4.5], [22, 45, 71]],
  [{ table, group: 2, support: 'flexible' }, [2.3, 4.5, 7.1], [37, 71, 113]],
]);
// ISO 10816-7:2009 Table A.1, as reproduced; its zones traced to the Europump guideline of 2013.
const part7: Row[] = [
  [{ table: 'iso-10816-7', category: 'I', ratedKw: 200 }, [2.5, 4.0, 6.6], null],
  [{ table: 'iso-10816-7', category: 'I', ratedKw: 200.1 }, [3.5, 5.0, 7.6], null],
  [{ table: 'iso-10816-7', category: 'II', ratedKw: 200 }, [3.2, 5.1, 8.5], null],
  [{ table: 'iso-10816-7', category: 'II', ratedKw: 200.1 }, [4.2, 6.1, 9.5], null],
];

describe('severity tables', () => {
  it.each([...part3, ...part7])('%o has the published boundaries', (choice, mmS, um) => {
    const limits = severityLimits(choice);
    expect(limits.velocityMmS).toEqual(mmS);
    expect(limits.displacementUm).toEqual(um);
    // A value on a boundary belongs to the lower zone (ISO 10816-3, a library's reading).
    for (const [index, zone] of (['A', 'B', 'C'] as const).entries()) {
      expect(zoneOf(mmS[index]!, limits.velocityMmS)).toBe(zone);
      expect(zoneOf(mmS[index]! * 1.0001, limits.velocityMmS)).toBe(['B', 'C', 'D'][index]);
    }
  });

  it.each([
    ['I', 45, 5.0, 8.3],
    ['I', 250, 6.3, 9.5],
    ['II', 45, 6.4, 10.6],
    ['II', 250, 7.6, 11.9],
  ] as const)(
    'category %s at %d kW: alarm at most %d, trip at most %d mm/s',
    (category, ratedKw, alarm, trip) => {
      const limits = severityLimits({ table: 'iso-10816-7', category, ratedKw });
      expect(limits.alarmMaxMmS).toBe(alarm);
      expect(limits.tripMaxMmS).toBe(trip);
      // The printed rows are 1.25 × B/C and 1.25 × C/D, rounded.
      expect(Math.abs(limits.alarmMaxMmS - 1.25 * limits.velocityMmS[1])).toBeLessThanOrEqual(0.05 + 1e-9);
      expect(Math.abs(limits.tripMaxMmS - 1.25 * limits.velocityMmS[2])).toBeLessThanOrEqual(0.05 + 1e-9);
    },
  );

  it('names whose limits they are', () => {
    expect(severityLimits({ table: 'iso-10816-7', category: 'I', ratedKw: 45 }).name).toBe(
      'ISO 10816-7 category I up to 200 kW',
    );
    expect(severityLimits({ table: 'iso-20816-3', group: 2, support: 'rigid' }).name).toBe(
      'ISO 20816-3 group 2, rigid support',
    );
  });

  it('takes limits of the configuration as they are', () => {
    const limits = severityLimits({ table: 'limits', limitsMmS: [1, 2, 4] });
    expect(limits).toMatchObject({
      velocityMmS: [1, 2, 4],
      displacementUm: null,
      alarmMaxMmS: 2.5,
      tripMaxMmS: 5,
    });
  });
});

describe('rules of ISO 10816-3', () => {
  const group2Rigid = severityLimits({ table: 'iso-10816-3', group: 2, support: 'rigid' });

  it('let the more severe of velocity and displacement decide (5.2.3)', () => {
    expect(severityZone(1.3, 25, group2Rigid)).toBe('B');
    expect(severityZone(2.9, 25, group2Rigid)).toBe('C');
    expect(severityZone(1.3, 80, group2Rigid)).toBe('D');
    expect(severityZone(1.4, 22, group2Rigid)).toBe('A');
  });

  it('cross near 10 to 12.6 Hz: below, displacement decides, above, velocity', () => {
    for (const [choice, mmS, um] of part3) {
      const limits = severityLimits(choice);
      for (const [index, velocity] of mmS.entries()) {
        // The frequency at which a sine meets both boundaries: v = 2πf·d.
        const crossHz = (velocity * 1000) / (2 * Math.PI * um![index]!);
        expect(crossHz).toBeGreaterThan(9.8);
        expect(crossHz).toBeLessThan(12.7);
        const zoneAt = (hz: number) =>
          severityZone(velocity * 0.99, (velocity * 0.99 * 1000) / (2 * Math.PI * hz), limits);
        expect(zoneAt(crossHz * 1.2) < zoneAt(crossHz * 0.8)).toBe(true);
      }
    }
  });

  it('give an alarm limit from the baseline, capped (5.4.1), and a highest trip limit (5.4.2)', () => {
    expect(alarmLimitFromBaseline(0.9, group2Rigid)).toBeCloseTo(1.6, 12);
    expect(alarmLimitFromBaseline(2.9, group2Rigid)).toBe(3.5);
    expect(group2Rigid.tripMaxMmS).toBe(5.625);
  });

  it('refuse figures that no RMS can be', () => {
    expect(() => zoneOf(-0.1, group2Rigid.velocityMmS)).toThrow(RangeError);
    expect(() => zoneOf(Number.NaN, group2Rigid.velocityMmS)).toThrow(RangeError);
    expect(() => alarmLimitFromBaseline(Number.NaN, group2Rigid)).toThrow(RangeError);
  });
});

describe('where zones apply', () => {
  const place: SeverityPlace = {
    severity: { table: 'iso-10816-7', category: 'I', ratedKw: 45 },
    direction: 'horizontal',
    at: 'bearing',
    thrust: false,
  };
  const part3Place: SeverityPlace = {
    ...place,
    severity: { table: 'iso-20816-3', group: 2, support: 'rigid' },
  };

  it('on bearing housings, axially at the thrust bearing only', () => {
    expect(severityApplies(place, 24.7)).toBeNull();
    expect(severityApplies({ ...place, at: 'foot' }, 24.7)).toMatch(/foot/);
    expect(severityApplies({ ...place, at: 'pipe' }, 24.7)).toMatch(/pipe/);
    expect(severityApplies({ ...place, direction: 'axial' }, 24.7)).toMatch(/thrust/);
    expect(severityApplies({ ...place, direction: 'axial', thrust: true }, 24.7)).toBeNull();
    expect(severityApplies({ ...place, severity: null }, 24.7)).toMatch(/no severity table/);
  });

  it('within the power of ISO 10816-7, above 1 kW (its scope, from memory)', () => {
    const at = (ratedKw: number) => ({
      ...place,
      severity: { ...place.severity, ratedKw } as SeverityChoice,
    });
    expect(severityApplies(at(1), 24.7)).toMatch(/above 1 kW/);
    expect(severityApplies(at(1.1), 24.7)).toBeNull();
  });

  it('within the speeds of the scopes (from memory), and without them where the speed is unknown', () => {
    expect(severityApplies(place, 599 / 60)).toMatch(/from 600 r\/min/);
    expect(severityApplies(place, 600 / 60)).toBeNull();
    expect(severityApplies(part3Place, 119 / 60)).toMatch(/from 120 r\/min/);
    expect(severityApplies(part3Place, 120 / 60)).toBeNull();
    expect(severityApplies(part3Place, 30_100 / 60)).toMatch(/up to 30000 r\/min/);
    expect(severityApplies(place, null)).toBeNull();
    expect(severityApplies({ ...place, severity: { table: 'limits', limitsMmS: [1, 2, 3] } }, 1)).toBeNull();
  });
});
