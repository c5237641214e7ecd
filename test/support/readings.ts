/** A reading of an invented pump, and the example payload of the topics page. */
import type { Reading } from '../../src/measure/reading.ts';

export const contractReading = {
  id: 'k3f9-81273',
  t: '2026-03-02T10:15:30.000Z',
  quality: 'good',
  why: [],
  first_index: 50331648,
  rate: { hz: 40958.2, source: 'measured', ppm: 12 },
  running: true,
  shaft: { hz: 24.71, source: 'spectrum' },
  velocity: { unit: 'mm/s', overall: 2.31, low: 0.21, 'running-speed': 2.02, harmonics: 0.74 },
  displacement: { unit: 'µm', rms: 14.9, p2p: 46.1 },
  orders: { '1': { mm_s: 2.0, deg: null }, '2': { mm_s: 0.4, deg: null }, '3': { mm_s: 0.1, deg: null } },
  acceleration: { unit: 'g', band_hz: [2, 16000], rms: 0.412, peak: 1.93, crest: 4.68, kurtosis: 3.4 },
  envelope: {
    unit: 'g²',
    band_hz: [500, 16000],
    mean: 0.031,
    floor: 0.0004,
    defect: 'outer',
    bpfo: { expected_hz: 88.6, hz: 88.4, line: 0.012, over_floor_db: 14.8, modulation: 0.39, harmonics: 3 },
    bpfi: null,
    bsf: null,
    ftf: null,
  },
  zone: 'B',
};

export function readingOf(): Reading {
  const { id: _id, t: _t, ...reading } = structuredClone(contractReading);
  return reading as unknown as Reading;
}
