import { describe, expect, it } from 'vitest';
import type { Machine, Point } from '../../src/config/station.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import { zoneFor } from '../../src/measure/zone.ts';
import { gOfVelocity, planOf, recordOf } from './bench.ts';

// ISO 20816-3 group 2 rigid: 1.4, 2.8, 4.5 mm/s and 22, 45, 71 µm; a value on a boundary belongs to the lower zone.
const { point } = planOf({ point: { severity: { table: 'iso-20816-3', group: 2, support: 'rigid' } } });

describe('a zone is that of the figure as published, four digits', () => {
  it.each([
    [4.5004, 10, 'C'],
    [4.5006, 10, 'D'],
    [1, 45.004, 'B'],
    [1, 45.006, 'C'],
  ])('%d mm/s and %d µm is %s', (mmS, um, zone) => {
    expect(zoneFor(point, true, 25, mmS, um)).toBe(zone);
  });
});

describe('a round speed', () => {
  const tachometer = { kind: 'tachometer', link: 'node-1', channel: 't', pulsesPerRev: 1 } as const;
  const part7 = { table: 'iso-10816-7', category: 'I', ratedKw: 45 } as const;
  const part3 = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;

  function read(rpm: number, machine: Partial<Machine>, severity: Point['severity']) {
    const hz = rpm / 60;
    const rateHz = 10_240;
    const plan = planOf({ rateHz, machine, point: { severity } });
    const samples = plan.recordSamples;
    const counts = Int32Array.from({ length: samples }, (_, i) => (((i / rateHz) * hz) % 1 < 0.4 ? 1 : 0));
    const tones = [
      [hz, gOfVelocity(2, hz)],
      [5, gOfVelocity(3, 5)],
    ] as const;
    const pulses = machine.shaft?.kind === 'tachometer' ? { counts, pulsesPerRev: 1 } : null;
    return measureRecord(plan, recordOf({ rateHz, samples, tones, tachometer: pulses }));
  }

  it('of 600 r/min has one band and one zone, whatever the last digit of a tachometer', () => {
    for (const rpm of [598.5, 599.99, 600, 600.01]) {
      const { velocity, zone } = read(rpm, { shaft: tachometer }, part7);
      expect(zone, `${rpm}`).toBe('A');
      expect(velocity.overall, `${rpm}`).toBeCloseTo(2, 1);
    }
    expect(read(590, { shaft: tachometer }, part7).zone).toBeNull();
  });

  it('that the settings give decides, and the slip from it does not', () => {
    for (const rpm of [592, 599, 605]) {
      const { zone } = read(rpm, { shaft: { kind: 'fixed', rpm: 600, tolerancePct: 3 } }, part7);
      expect(zone, `${rpm}`).toBe('A');
    }
    for (const rpm of [119.5, 120.5]) {
      const { zone } = read(rpm, { shaft: { kind: 'fixed', rpm: 120, tolerancePct: 3 } }, part3);
      expect(zone, `${rpm}`).toBe('D');
    }
  });
});
