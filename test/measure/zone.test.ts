import { describe, expect, it } from 'vitest';
import { zoneFor } from '../../src/measure/zone.ts';
import { planOf } from './bench.ts';

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
