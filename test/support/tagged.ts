/** A snapshot file with everything that its tags can say, for tests of what is made of it. */
import type { SnapshotTags } from '../../src/snapshot/tags.ts';

export const someTags: SnapshotTags = {
  id: '20260302T101530Z-pump-1-3f2a',
  site: 'north-weir',
  machines: ['pump-1'],
  link: 'node-1',
  nominalRateHz: 40_960,
  rate: { hz: 40_958.2173, source: 'measured', ppm: 12.5 },
  start: '2026-03-02T10:15:20.125Z',
  clock: 'free',
  firstIndex: 50_331_648,
  nodeSerial: 'A1',
  shafts: [{ machine: 'pump-1', hz: 24.71, source: 'spectrum' }],
  cause: 'alarm pump-1/motor-de-h.zone',
  kind: 'alarm',
  alarms: ['pump-1/motor-de-h.zone'],
  takenRunS: 86_400,
  version: '0.1.0',
  config: '0123456789ab',
  gaps: [{ at: 100, samples: 7 }],
  channels: [
    // What a node sends is a 32-bit floating-point number: 0.1 is not one, its nearest is.
    {
      name: 'h',
      points: ['pump-1/motor-de-h'],
      unit: 'g',
      unitsPerCount: Math.fround(0.0001),
      countRange: [-32_768, 32_767],
    },
    {
      name: 'v',
      points: ['pump-1/motor-de-v', 'pump-1/foot'],
      unit: 'm/s2',
      unitsPerCount: 2 ** -12,
      countRange: null,
    },
    { name: 'tach', points: [], unit: 'logic', unitsPerCount: 1, countRange: null },
  ],
};
