/** The bands in which a defect may ring: which structure answers to an impact is not known beforehand. */

/**
 * Edges of the partial bands. A defect excites one resonance or another; in the whole band the others' noise dilutes
 * it. Octaves, because a resonance is a constant fraction wide; from 500 Hz, below which a machine's own tones rule.
 */
const edgesHz = [500, 1500, 3000, 6000, 12_000, 24_000] as const;

/**
 * The bands that are searched for a defect.
 *
 * @param bandHz the widest band that the settings, the sample rate and the sensor leave
 * @returns the whole band, then each partial band, cut to it, of which at least half remains
 * Worked: 500 to 4687.5 Hz gives 500–4687.5, 500–1500, 1500–3000 and 3000–4687.5 Hz.
 */
export function evidenceBands(bandHz: readonly [number, number]): [number, number][] {
  const [low, high] = bandHz;
  const bands: [number, number][] = [[low, high]];
  for (let i = 0; i + 1 < edgesHz.length; i++) {
    const from = Math.max(low, edgesHz[i]!);
    const to = Math.min(high, edgesHz[i + 1]!);
    if (to - from >= 0.5 * (edgesHz[i + 1]! - edgesHz[i]!)) bands.push([from, to]);
  }
  return bands;
}
