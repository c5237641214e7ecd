/**
 * The true sample rate of a node, from its sample index against the gateway's monotonic clock.
 *
 * What arrives is late by an unknown, changing delay and never early. So only the least delayed arrival of each
 * second counts: arrivals are gathered in blocks of one second, of each block only the lower convex hull of
 * (index, time) is kept, the hull of all blocks gives a first slope (as in clock skew estimation from network
 * delays: Moon, Skelly and Towsley 1999), and a straight line is then fitted by least squares through the
 * earliest point of each block, leaving out blocks that a stall made late throughout.
 *
 * Uncertainty: twice the standard error of that slope from the scatter of the blocks, and what a tenth of a
 * millisecond at both ends would make (scheduling that is alike for all blocks does not scatter).
 *
 * What the node claims may be off by several percent (RC oscillators) or by a few ppm (crystals), and nothing on
 * the link says which. The measured rate is used once its uncertainty is at most 200 ppm over at least ten seconds:
 * less than a line of a 3200-line spectrum at its upper end (1/3200 = 312 ppm). Until then the claim is used, its
 * uncertainty unknown.
 */

/** The rate to measure with, and how sure it is. */
export interface RateEstimate {
  readonly hz: number;
  readonly source: 'nominal' | 'measured';
  /** Standard uncertainty in parts per million; null: nobody knows. */
  readonly ppm: number | null;
}

const BLOCK_MS = 1000;
/** The regression looks back over so many blocks: two minutes follow an RC oscillator that warms up. */
const MAX_BLOCKS = 120;
const MIN_SPAN_MS = 10_000;
const MAX_PPM = 200;
const RESOLUTION_MS = 0.1;
/** A gap must have taken at least this share of its nominal time, less this allowance; else it is no lost time. */
const GAP_SHARE = 0.8;
const GAP_ALLOWANCE_MS = 1000;
/** So many blocks in a row later than the line by more than this: the clock relation itself has moved. */
const SHIFTED_BLOCKS = 5;
const SHIFTED_MS = 100;

interface Hull {
  index: number[];
  ms: number[];
}

/** One estimate runs as long as the node does: begin anew for a restarted node. Two minutes of memory. */
export class RateEstimator {
  readonly nominalHz: number;
  /** Times that the clock relation was found broken and the measurement began anew. */
  restarts = 0;
  #blocks: Hull[] = [];
  #open: Hull = { index: [], ms: [] };
  #openedMs = 0;
  #lastIndex = Number.NaN;
  #lastMs = 0;
  #lateBlocks = 0;
  #measured: { hz: number; ppm: number; spanMs: number } | null = null;

  constructor(nominalHz: number) {
    if (!(nominalHz > 0 && Number.isFinite(nominalHz)))
      throw new RangeError(`rate: ${nominalHz} Hz is no rate`);
    this.nominalHz = nominalHz;
  }

  /** What the regression says whether or not it is good enough to use; null: not enough yet. */
  get measured(): { readonly hz: number; readonly ppm: number } | null {
    return this.#measured;
  }

  get estimate(): RateEstimate {
    const measured = this.#measured;
    if (measured && measured.ppm <= MAX_PPM && measured.spanMs >= MIN_SPAN_MS) {
      return { hz: measured.hz, source: 'measured', ppm: measured.ppm };
    }
    return { hz: this.nominalHz, source: 'nominal', ppm: null };
  }

  /** Samples up to (not including) `endIndex` had arrived at `nowMs` of the monotonic clock. */
  observe(endIndex: number, nowMs: number): void {
    if (endIndex <= this.#lastIndex) return;
    const elapsedMs = nowMs - this.#lastMs;
    const advanceMs = ((endIndex - this.#lastIndex) / this.nominalHz) * 1000;
    if (advanceMs * GAP_SHARE > elapsedMs + GAP_ALLOWANCE_MS) this.#beginAnew();
    if (this.#open.index.length > 0 && nowMs - this.#openedMs >= BLOCK_MS) this.#closeBlock();
    if (this.#open.index.length === 0) this.#openedMs = nowMs;
    this.#lastIndex = endIndex;
    this.#lastMs = nowMs;
    addToLowerHull(this.#open, endIndex, nowMs);
  }

  #beginAnew(): void {
    if (Number.isNaN(this.#lastIndex)) return;
    this.#blocks = [];
    this.#open = { index: [], ms: [] };
    this.#measured = null;
    this.#lateBlocks = 0;
    this.restarts++;
  }

  #closeBlock(): void {
    this.#blocks.push(this.#open);
    this.#open = { index: [], ms: [] };
    if (this.#blocks.length > MAX_BLOCKS) this.#blocks.shift();
    if (this.#blocks.length >= 4) this.#fit();
  }

  #fit(): void {
    const blocks = this.#blocks;
    const index0 = blocks[0]!.index[0]!;
    const ms0 = blocks[0]!.ms[0]!;
    const slope = hullSlope(blocks);

    // The earliest point of each block about a line of that slope: x in samples, y in ms late.
    const x: number[] = [];
    const y: number[] = [];
    for (const block of blocks) {
      let best = Number.POSITIVE_INFINITY;
      let at = 0;
      for (let k = 0; k < block.index.length; k++) {
        const late = block.ms[k]! - ms0 - slope * (block.index[k]! - index0);
        if (late < best) {
          best = late;
          at = block.index[k]! - index0;
        }
      }
      x.push(at);
      y.push(best);
    }
    const floor = Math.min(...y);
    const typical = median(y) - floor;
    const limit = floor + 4 * typical + 2 * RESOLUTION_MS;
    const kept = x.map((_, i) => i).filter((i) => y[i]! <= limit);

    this.#lateBlocks = y.at(-1)! > floor + Math.max(SHIFTED_MS, 8 * typical) ? this.#lateBlocks + 1 : 0;
    if (this.#lateBlocks >= SHIFTED_BLOCKS) {
      this.#beginAnew();
      return;
    }

    const meanX = mean(kept, x);
    const meanY = mean(kept, y);
    let sxx = 0;
    let sxy = 0;
    for (const i of kept) {
      sxx += (x[i]! - meanX) ** 2;
      sxy += (x[i]! - meanX) * (y[i]! - meanY);
    }
    if (kept.length < 4 || sxx === 0) return;
    const correction = sxy / sxx;
    let scatter = 0;
    for (const i of kept) scatter += (y[i]! - meanY - correction * (x[i]! - meanX)) ** 2;
    const slopeError = Math.sqrt(scatter / (kept.length - 2) / sxx);
    const msPerSample = slope + correction;
    if (!(msPerSample > 0)) return;
    const spanMs = (x[kept.at(-1)!]! - x[kept[0]!]!) * msPerSample;
    const ppm = 1e6 * Math.hypot((2 * slopeError) / msPerSample, (Math.SQRT2 * RESOLUTION_MS) / spanMs);
    this.#measured = { hz: 1000 / msPerSample, ppm, spanMs };
  }
}

/** Appends a point (index rising) to a lower convex hull, dropping the points that it lifts above the hull. */
function addToLowerHull({ index, ms }: Hull, i: number, t: number): void {
  while (index.length >= 2) {
    const i1 = index.at(-1)!;
    const t1 = ms.at(-1)!;
    const i0 = index.at(-2)!;
    const t0 = ms.at(-2)!;
    if ((t1 - t0) * (i - i0) < (t - t0) * (i1 - i0)) break;
    index.pop();
    ms.pop();
  }
  index.push(i);
  ms.push(t);
}

/** Slope, in ms per sample, of the edge of the common lower hull that spans the middle of the blocks. */
function hullSlope(blocks: readonly Hull[]): number {
  const all: Hull = { index: [], ms: [] };
  for (const block of blocks) {
    for (let k = 0; k < block.index.length; k++) addToLowerHull(all, block.index[k]!, block.ms[k]!);
  }
  const middle = (all.index[0]! + all.index.at(-1)!) / 2;
  let right = all.index.findIndex((index) => index >= middle);
  if (right < 1) right = 1;
  return (all.ms[right]! - all.ms[right - 1]!) / (all.index[right]! - all.index[right - 1]!);
}

function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b);
  const half = sorted.length >> 1;
  return sorted.length % 2 ? sorted[half]! : (sorted[half - 1]! + sorted[half]!) / 2;
}

function mean(which: readonly number[], values: readonly number[]): number {
  let sum = 0;
  for (const i of which) sum += values[i]!;
  return sum / which.length;
}
