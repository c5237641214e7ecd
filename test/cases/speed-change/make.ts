/**
 * A change of speed under an inverter: 24 Hz with 2 mm/s, from 20 s on 15 Hz with 5 mm/s, watched at shaft speed.
 *
 * The band follows the shaft (orders 0.8 to 1.2): where it stood, at 24 Hz, there is nothing any more. The first record
 * at the lower speed counts as coasting down, so it is over from k = 21 on, and told five seconds later.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 5120;

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [
    tell({ rateHz, seconds: 40, shaftHz: (t) => (t < 20 ? 24 : 15), mmS: (t) => (t < 20 ? 2 : 5) }),
  ],
};
