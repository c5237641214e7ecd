/**
 * An outer race that begins to fail. Knocks at BPFO = 9/2·(1 − 7.938/39.04) = 3.58503 times the shaft speed, of 0.001 g
 * at first, growing tenfold each 15 s from 20 s on, and 1 g from 65 s on.
 *
 * Until 20 s they are a third of the noise and must not be seen; long before 65 s they must. It takes three readings of five;
 * once raised it stays, for it only grows.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 12_800;
const orders = (9 / 2) * (1 - 7.938 / 39.04);

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [
    tell({
      rateHz,
      seconds: 80,
      mmS: () => 2,
      knocks: { orders, peakG: (t) => Math.min(1, 0.001 * 10 ** (Math.max(0, t - 20) / 15)) },
    }),
  ],
};
