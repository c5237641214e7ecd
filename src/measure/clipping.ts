/**
 * Clipping before the converter: three or more equal samples at an extreme of a record. A converter also gives equal
 * counts at the smooth top of a slow tone, and the same top each period of a tone that fits its rate; those are told
 * apart by what lies beside them.
 */

/** Fewer equal samples prove nothing. */
const LEAST = 3;
/** Half a plateau's length beside a smooth top the counts have dropped by at most 4 to 6; beside a clipped one more. */
const SMOOTH_DROP = 8;
/** How much denser than nearby the extreme of a natural record may be (the edge of a sine's distribution). */
const EDGE_DENSITY = 8;
/** A pile of samples on the extreme less likely than this is a rail. */
const RAIL_PROBABILITY = 1e-6;

/** How many samples of the record stand at a rail; 0: none do. */
export function clippedSamples(counts: Int32Array): number {
  return atRail(counts, 1) + atRail(counts, -1);
}

/** @param sign 1 for the upper extreme, −1 for the lower one. */
function atRail(counts: Int32Array, sign: 1 | -1): number {
  let extreme = Number.NEGATIVE_INFINITY;
  let opposite = Number.POSITIVE_INFINITY;
  for (let i = 0; i < counts.length; i++) {
    const level = sign * counts[i]!;
    if (level > extreme) extreme = level;
    if (level < opposite) opposite = level;
  }
  const reach = Math.max(16, Math.round((extreme - opposite) / 64));
  const places: number[] = [];
  let near = 0;
  for (let i = 0; i < counts.length; i++) {
    const below = extreme - sign * counts[i]!;
    if (below === 0) places.push(i);
    else if (below <= reach) near++;
  }
  if (places.length < LEAST) return 0;
  const clipped =
    hasPlateau(counts, places) || (isPiledUp(places.length, near, reach) && isUneven(counts, places));
  return clipped ? places.length : 0;
}

/** A run of equal samples that the waveform enters or leaves with a corner. */
function hasPlateau(counts: Int32Array, places: readonly number[]): boolean {
  for (let from = 0; from < places.length; ) {
    let to = from;
    while (to + 1 < places.length && places[to + 1] === places[to]! + 1) to++;
    const length = to - from + 1;
    if (length >= LEAST) {
      const level = counts[places[from]!]!;
      const beside = Math.ceil(length / 2);
      const drops = [places[from]! - beside, places[to]! + beside]
        .filter((i) => i >= 0 && i < counts.length)
        .map((i) => Math.abs(level - counts[i]!));
      if (drops.length > 0 && Math.min(...drops) > SMOOTH_DROP) return true;
    }
    from = to + 1;
  }
  return false;
}

/** Poisson: as many as these on one count, where its neighbourhood has so few. */
function isPiledUp(samples: number, near: number, reach: number): boolean {
  const expected = (EDGE_DENSITY * Math.max(1, near)) / reach;
  if (expected >= samples) return false;
  // P(n ≥ samples) is at most a geometric tail from its first term.
  let logTerm = -expected;
  for (let k = 1; k <= samples; k++) logTerm += Math.log(expected / k);
  return logTerm - Math.log(1 - expected / (samples + 1)) < Math.log(RAIL_PROBABILITY);
}

/** Tops of a tone all have the same curvature; clipped ones are cut at different heights. */
function isUneven(counts: Int32Array, places: readonly number[]): boolean {
  let least = Number.POSITIVE_INFINITY;
  let most = 0;
  for (const i of places) {
    if (i === 0 || i === counts.length - 1) continue;
    const curvature = Math.abs(2 * counts[i]! - counts[i - 1]! - counts[i + 1]!);
    least = Math.min(least, curvature);
    most = Math.max(most, curvature);
  }
  return most - least > Math.max(SMOOTH_DROP, most / 16);
}
