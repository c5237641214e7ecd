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

/**
 * Slip of an induction motor: how far its shaft stays behind synchronous speed.
 *
 * @param synchronous synchronous speed, Hz.
 * @param shaftHz speed of the motor's shaft, Hz.
 * @returns share of the synchronous speed, without unit; 0 or less for a shaft that does not stay behind.
 *
 * Source: any handbook of electrical machines. Worked: 30 Hz, 29.5 Hz (1770 r/min): 0.016667.
 */
export function slip(synchronous: number, shaftHz: number): number {
  return (synchronous - shaftHz) / synchronous;
}

/**
 * How far twice the supply frequency lies from the nearest multiple of the shaft's speed. For a motor's own shaft that
 * multiple is the one by its number of poles, and the distance is its pole pass frequency (poles × slip speed).
 *
 * @param mainsHz supply frequency.
 * @param shaftHz speed of the shaft, above 0 Hz.
 * @returns Hz, 0 to half the shaft's speed.
 *
 * Source: any handbook of electrical machines. Worked: 50 Hz, 1480 r/min: 100 − 4 × 24.6667 = 1.3333 Hz.
 */
export function twiceMainsOffOrderHz(mainsHz: number, shaftHz: number): number {
  return Math.abs(2 * mainsHz - Math.round((2 * mainsHz) / shaftHz) * shaftHz);
}
