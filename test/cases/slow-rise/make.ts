/**
 * A slow rise through B, C and D: 2 mm/s and a tenth more each second, until 60 s; then 5 mm/s, from 80 s on 2 mm/s.
 *
 * The middle of record k has 2 + 0.1·(k + 0.5) mm/s: over 4.0 from k = 20 on, over 6.6 from k = 46 on. Five seconds
 * later each it is told. B is no news. From 60 s on it is within the deadband of danger (under 5.94), from 80 s on
 * within that of alert, and each is told five seconds later; from danger to alert nothing is announced.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 5120;

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [tell({ rateHz, seconds: 90, mmS: (t) => (t < 60 ? 2 + 0.1 * t : t < 80 ? 5 : 2) })],
};
