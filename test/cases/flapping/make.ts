/**
 * Flapping around a limit of 4.0 mm/s, under a rule with delays and a deadband of 10 % and under one without either.
 * 3 mm/s for 10 s, 5 mm/s for 10 s, then 4.3 and 3.7 in turn each second until 60 s, then 2 mm/s.
 *
 * `zone` is over from k = 10 on, told at 15, and stays: 3.7 is above 3.6. From k = 60 on it is not, told at 65.
 * `bare` is told at 10, falls at 21, is told anew at 22, falls at 23, and the third announcement within a minute at 24
 * is chattering: it is held until it has been off for 60 s, k = 58 being its last time on, and returns at 118.
 * Six messages of a machine fit into a minute. Three of its state (at 0, and at 10 and 15 with each announcement) and
 * three alarms are sent by 21; what happened at 22, 23 and 24 waits until the first of them is a minute old, and is told
 * as it then stands, with the time of its last change. The journal has all three.
 */
import { type Case, tell } from '../signal.ts';

const rateHz = 5120;
const flap = (t: number) => (Math.floor(t) % 2 === 0 ? 4.3 : 3.7);

export const recipe: Case = {
  points: 'pump-1/h',
  rateHz,
  counts: () => [
    tell({ rateHz, seconds: 125, mmS: (t) => (t < 10 ? 3 : t < 20 ? 5 : t < 60 ? flap(t) : 2) }),
  ],
};
