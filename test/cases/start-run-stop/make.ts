/**
 * Start, run, stop. At rest for 5 s; a start that shakes with 12 mm/s for 5 s, within the start delay of 8 s; 2 mm/s
 * until 30 s, 5 mm/s until it stops at 40 s; at rest until 50 s; a start with 12 mm/s for 2 s, then 2 mm/s.
 *
 * The start is no alarm. Over 4.0 from k = 30 on, told at 35. The stop neither clears it nor raises anything. After the
 * second start readings count from k = 58 on, and five seconds later it has cleared.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 5120;

function mmS(t: number): number {
  if (t < 5) return 0;
  if (t < 10) return 12;
  if (t < 30) return 2;
  if (t < 40) return 5;
  if (t < 50) return 0;
  return t < 52 ? 12 : 2;
}

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [tell({ rateHz, seconds: 75, mmS })],
};
