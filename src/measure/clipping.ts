/**
 * Clipping before the converter: three or more equal samples at an extreme of a record. A converter also gives equal
 * counts at the smooth top of a slow tone, and the same top each period of a tone that fits its rate; those are told
 * apart by what lies beside them.
 */

/** Fewer equal samples prove nothing. */
const LEAST = 3;
/** Half a plateau's length beside a smooth top the counts have dropped by at most 4 to 6; beside a clipped one more. */
const SMOOTH_DROP = 8;
/** A pile of samples on the extreme less likely than this is a rail. */
const RAIL_PROBABILITY = 1e-6;
/** The pile is held against what lies within so many counts below it. */
const REACHES = [1, 3, 8, 15, 35, 63, 255, 1023] as const;

/** How many samples of the record stand at a rail; 0: none do. */
export function clippedSamples(counts: Int32Array): number {
  const found = atRails(counts);
  if (found === 0) return 0;
  // Twelve bits sent as sixteen step by 16 counts: what is told by single counts is told again by steps.
  const step = smallestStep(counts);
  return step === 1 ? found : atRails(counts.map((count) => Math.round(count / step)));
}

function atRails(counts: Int32Array): number {
  return atRail(counts, 1) + atRail(counts, -1);
}

/** Smallest distance of two different counts. */
function smallestStep(counts: Int32Array): number {
  const sorted = counts.slice().sort();
  let smallest = Number.POSITIVE_INFINITY;
  for (let i = 1; i < sorted.length && smallest > 1; i++) {
    const step = sorted[i]! - sorted[i - 1]!;
    if (step > 0 && step < smallest) smallest = step;
  }
  return Number.isFinite(smallest) ? smallest : 1;
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
  const places: number[] = [];
  const near = REACHES.map(() => 0);
  const farthest = REACHES.at(-1)!;
  for (let i = 0; i < counts.length; i++) {
    const below = extreme - sign * counts[i]!;
    if (below === 0) places.push(i);
    else if (below <= farthest) {
      for (let r = REACHES.length - 1; r >= 0 && below <= REACHES[r]!; r--) near[r] = near[r]! + 1;
    }
  }
  if (places.length < LEAST) return 0;
  const height = (extreme - opposite) / 2;
  const expected = REACHES.flatMap((reach, r) =>
    reach === 1 || reach <= height / 2 ? [mostByChance(near[r]!, reach)] : [],
  );
  const least = Math.min(...expected);
  const clipped =
    hasPlateau(counts, places, least) ||
    (isPiledUp(places.length, least) && isUneven(counts, places, height));
  return clipped ? places.length : 0;
}

/**
 * A run of equal samples that the waveform enters or leaves with a corner, longer than chance makes where so many
 * samples stand at a natural edge.
 *
 * @param expected how many do, at most
 */
function hasPlateau(counts: Int32Array, places: readonly number[], expected: number): boolean {
  const share = expected / counts.length;
  for (let from = 0; from < places.length; ) {
    let to = from;
    while (to + 1 < places.length && places[to + 1] === places[to]! + 1) to++;
    const length = to - from + 1;
    if (length >= LEAST && counts.length * share ** length < RAIL_PROBABILITY) {
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

/**
 * How many samples a natural edge has on its topmost count, at most. The steepest edge is that of a sine: of the samples
 * within d counts of its top there are √d as many, so 1/(√(1+r) − 1) of what lies within r counts below it.
 */
function mostByChance(near: number, reach: number): number {
  return Math.max(1, near) / (Math.sqrt(1 + reach) - 1);
}

/** Whether so many samples on the extreme are more than chance makes of a natural edge. */
function isPiledUp(samples: number, expected: number): boolean {
  if (expected >= samples) return false;
  // Poisson: P(n ≥ samples) is at most a geometric tail from its first term.
  let logTerm = -expected;
  for (let k = 1; k <= samples; k++) logTerm += Math.log(expected / k);
  return logTerm - Math.log(1 - expected / (samples + 1)) < Math.log(RAIL_PROBABILITY);
}

/**
 * Tops of a tone are alike: all have one curvature, and their neighbours differ by no more than the phase leaves within
 * one count of the top, 2·√(2·height) either way, or all by the same where the tone fits the rate. Clipped ones are cut at
 * different heights, and so at different distances from their top.
 */
function isUneven(counts: Int32Array, places: readonly number[], height: number): boolean {
  const neighbours = new Set<number>();
  const curvature = { least: Number.POSITIVE_INFINITY, most: Number.NEGATIVE_INFINITY };
  const lean = { least: Number.POSITIVE_INFINITY, most: Number.NEGATIVE_INFINITY };
  for (const i of places) {
    if (i === 0 || i === counts.length - 1) continue;
    const [before, here, after] = [counts[i - 1]!, counts[i]!, counts[i + 1]!];
    note(curvature, Math.abs(2 * here - before - after));
    note(lean, after - before);
    if (neighbours.size < LEAST) neighbours.add(before * 2 ** 25 + after);
  }
  // A tone that fits the rate may meet its top twice a period, at two places.
  if (neighbours.size < LEAST) return false;
  return (
    curvature.most - curvature.least > SMOOTH_DROP ||
    lean.most - lean.least > SMOOTH_DROP + 5 * Math.sqrt(2 * height)
  );
}

function note(range: { least: number; most: number }, value: number): void {
  range.least = Math.min(range.least, value);
  range.most = Math.max(range.most, value);
}
