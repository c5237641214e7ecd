/** What the supply of an induction motor says about its speed. */

/**
 * Synchronous speed of an induction motor, 120·f/poles in r/min, in Hz. On mains the shaft never turns at or above
 * it: without slip there is no torque.
 *
 * @param mainsHz supply frequency.
 * @param poles number of poles, even, at least 2.
 * @throws RangeError for poles that no machine has.
 *
 * Source: any handbook of electrical machines. Worked: 50 Hz, 4 poles: 25 Hz (1500 r/min).
 */
export function synchronousHz(mainsHz: number, poles: number): number {
  if (!(Number.isInteger(poles) && poles >= 2 && poles % 2 === 0)) {
    throw new RangeError(`a motor has an even number of poles, at least 2, not ${poles}`);
  }
  return (2 * mainsHz) / poles;
}
