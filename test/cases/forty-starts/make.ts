/**
 * Forty starts, a day of a lift pump in seven minutes: 4 s at rest, 6 s of running, of which the first second shakes with
 * 12 mm/s. The first twenty runs have 2 mm/s, the others 5 mm/s.
 *
 * No start is an alarm (start delay 2 s). Four records of a run count, k = 10c + 6 to 10c + 9, fewer than the on-delay of
 * 6 s asks for; it counts while the machine runs, over stops: over from k = 206 on, 3 s by the stop at 209, 6 s at 218.
 * One alarm for twenty bad runs.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 5120;

function mmS(t: number): number {
  const inCycle = t % 10;
  if (inCycle < 4) return 0;
  if (inCycle < 5) return 12;
  return t < 200 ? 2 : 5;
}

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [tell({ rateHz, seconds: 400, mmS })],
};
