/** The two-state timer behind every alarm condition: on and off delays in sample time, kept as elapsed seconds. */

export interface Debounce {
  readonly on: boolean;
  /** How long readings have said the opposite of `on`; null: the last one agreed with it. */
  readonly contraryS: number | null;
  /** Label of the first reading of the unbroken condition, also while its delay runs; null: no condition. */
  readonly since: string | null;
}

export const QUIET: Debounce = { on: false, contraryS: null, since: null };

/**
 * One reading that counts. A reading that does not count (null, machine stopped, starting) is not passed in, which
 * holds the timer.
 *
 * @param says whether this reading shows the condition.
 * @param elapsedS sample time since the point's previous reading; null: unknown, counted as 0.
 * @param t label of the reading at which the condition began, as far as this reading knows.
 *
 * A delay is met at the first reading at least that long after the first one that said so. Worked: delay 30 s,
 * readings every 10 s, over the limit from t = 10 s: on at t = 40 s.
 */
export function debounce(
  from: Debounce,
  says: boolean,
  elapsedS: number | null,
  t: string,
  delays: { readonly onDelayS: number; readonly offDelayS: number },
): Debounce {
  if (says === from.on) {
    if (from.contraryS === null) return from;
    return from.on ? { ...from, contraryS: null } : QUIET;
  }
  const contraryS = from.contraryS === null ? 0 : from.contraryS + (elapsedS ?? 0);
  const since = says ? (from.since ?? t) : from.since;
  // Binary fractions of record lengths add up to a hair less than the delay that they make.
  if (contraryS + 1e-6 < (says ? delays.onDelayS : delays.offDelayS))
    return { on: from.on, contraryS, since };
  return says ? { on: true, contraryS: null, since } : QUIET;
}
