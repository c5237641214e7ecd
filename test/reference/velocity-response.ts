/** The response that ISO 2954 asks of a velocity instrument, and checks that hold some way of measuring against it. */
import type { OutsideCheck } from './outside-checks.ts';

const responseTable: readonly [hz: number, least: number, most: number, OutsideCheck['status']][] = [
  // The outer four are of the edition of 1975.
  [1, 0, 0.001, 'memory'],
  [2.5, 0, 0.016, 'memory'],
  [10, 0.8, 1.1, 'repro'],
  [20, 0.9, 1.1, 'repro'],
  [40, 0.9, 1.1, 'repro'],
  [80, 0.999, 1.001, 'repro'],
  [160, 0.9, 1.1, 'repro'],
  [500, 0.9, 1.1, 'repro'],
  [1000, 0.8, 1.1, 'repro'],
  [4000, 0, 0.016, 'memory'],
  [10_000, 0, 0.001, 'memory'],
];

/** @param measure what is shown for a tone of 1 mm/s RMS, 10 to 1000 Hz being the band. */
export function velocityResponse(id: string, measure: (hz: number) => number): OutsideCheck[] {
  return responseTable.map(([hz, least, most, status]) => ({
    id: `${id}.${hz}-hz`,
    source: 'ISO 2954, tolerances of the velocity response, 10 to 1000 Hz',
    status,
    value: (least + most) / 2,
    tolerance: (most - least) / 2,
    unit: 'of the true velocity',
    measure: () => measure(hz),
  }));
}
