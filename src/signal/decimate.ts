import { designLowpass, filterGain, kaiserTaps } from './kaiser.ts';
import { requireCount, requirePositive, SignalRangeError } from './range-error.ts';

export interface DecimationOptions {
  /** Rate before, Hz. */
  readonly rateHz: number;
  /** Whole number by which the rate is divided. */
  readonly factor: number;
  /** The band that is kept clean is 0 to this, Hz. */
  readonly fmaxHz: number;
  /** What could fold into 0..fmaxHz is lower by at least this, dB, 21 to 140. */
  readonly attenuationDb: number;
}

interface Stage {
  readonly factor: number;
  /** Rate before this stage, Hz. */
  readonly rateHz: number;
  readonly taps: Float64Array;
  readonly kernel: Kernel;
}

/** A symmetric filter as pairs of equal taps about its middle, without its zeros. */
interface Kernel {
  readonly half: number;
  readonly offsets: Int32Array;
  readonly weights: Float64Array;
}

export interface DecimationPlan {
  /** Rate before and after, Hz. */
  readonly rateHz: number;
  readonly outRateHz: number;
  readonly factor: number;
  readonly fmaxHz: number;
  /** Raw samples needed before the first output and after the last. */
  readonly marginSamples: number;
  /** Raw index of output 0; output k stands at firstOutputAt + k·factor. Equal to marginSamples. */
  readonly firstOutputAt: number;
  /** Factor and filter length of each stage, in order. */
  readonly stages: readonly Stage[];
  /** Multiply-adds per raw sample. */
  readonly cost: number;
  /** Outputs that n raw samples give. */
  outputLength(n: number): number;
  /** Raw samples that m outputs need. */
  inputLength(m: number): number;
  /** Gain of the whole cascade from a raw frequency, Hz, to wherever it folds. */
  response(fHz: number): number;
}

/**
 * Largest whole number that the rate may be divided by, with prime factors of at most 7.
 *
 * @param rateHz Rate before, Hz.
 * @param fmaxHz Band to keep, Hz: rate/factor ≥ 2.56·fmaxHz (common practice, no source).
 * @returns Factor, 1 or more.
 * @throws SignalRangeError if even the raw rate is below 2.56·fmaxHz.
 * @example chooseFactor(48828, 1000) is 18 (19 would do, but is prime).
 */
export function chooseFactor(rateHz: number, fmaxHz: number): number {
  requirePositive('rateHz', rateHz);
  requirePositive('fmaxHz', fmaxHz);
  // A hair of tolerance, so that a rate of exactly 2.56·fmax passes whatever its last bit.
  const most = Math.floor((rateHz / (2.56 * fmaxHz)) * (1 + 1e-12));
  if (most < 1) {
    throw new SignalRangeError('fmaxHz', fmaxHz, `needs to be at most rate / 2.56, ${rateHz / 2.56} Hz`);
  }
  let factor = most;
  while (primeFactors(factor).some((p) => p > 7)) factor--;
  return factor;
}

/**
 * Plans an anti-alias decimation as a cascade over the prime factors, in the cheapest order. Each stage protects
 * only 0..fmaxHz: its stop band begins at its output rate − fmaxHz, and what folds above fmaxHz is never to be used.
 *
 * @param options Rate, factor, band to keep, attenuation.
 * @returns The plan, for `decimate`.
 * @throws SignalRangeError if the rate after is not above 2·fmaxHz or a filter would be longer than 16 383 taps.
 * @see Crochiere and Rabiner, Multirate Digital Signal Processing (from memory): multistage design with don't-care bands.
 * @example 40 960 Hz by 16 for 1000 Hz at 80 dB: four stages of 2, 2560 Hz after.
 */
export function planDecimation(options: DecimationOptions): DecimationPlan {
  const { rateHz, factor, fmaxHz, attenuationDb } = options;
  requirePositive('rateHz', rateHz);
  requirePositive('fmaxHz', fmaxHz);
  requireCount('factor', factor, 1);
  const outRateHz = rateHz / factor;
  if (!(outRateHz > 2 * fmaxHz)) {
    throw new SignalRangeError('factor', factor, `leaves ${outRateHz} Hz, which cannot carry ${fmaxHz} Hz`);
  }
  const stages: Stage[] = [];
  let stageRateHz = rateHz;
  for (const p of cheapestOrder(options)) {
    const stopHz = stageRateHz / p - fmaxHz;
    const taps = designLowpass({ rateHz: stageRateHz, passHz: fmaxHz, stopHz, attenuationDb });
    stages.push({ factor: p, rateHz: stageRateHz, taps, kernel: foldKernel(taps) });
    stageRateHz /= p;
  }
  let marginSamples = 0;
  let cost = 0;
  let before = 1;
  for (const stage of stages) {
    marginSamples += stage.kernel.half * before;
    before *= stage.factor;
    cost += stage.kernel.weights.length / before;
  }
  return {
    rateHz,
    outRateHz,
    factor,
    fmaxHz,
    marginSamples,
    firstOutputAt: marginSamples,
    stages,
    cost,
    outputLength: (n) => Math.max(0, Math.floor((n - 1 - 2 * marginSamples) / factor) + 1),
    inputLength: (m) => (m < 1 ? 0 : (m - 1) * factor + 1 + 2 * marginSamples),
    response: (fHz) => stages.reduce((gain, s) => gain * Math.abs(filterGain(s.taps, s.rateHz, fHz)), 1),
  };
}

/**
 * Decimates a stretch. Only outputs whose whole filter support lies inside it come out, so there is no transient and
 * no state: the same samples always give the same outputs.
 *
 * @param plan From `planDecimation`.
 * @param x Raw samples.
 * @returns plan.outputLength(x.length) samples; number k stands at raw index plan.firstOutputAt + k·plan.factor.
 *   Factor 1 gives a copy.
 * @throws SignalRangeError if the stretch is shorter than the filters need for one output.
 * @example A constant 1 comes out as 1 to within 1e-12.
 */
export function decimate(plan: DecimationPlan, x: Float64Array): Float64Array {
  const needed = plan.inputLength(1);
  if (x.length < needed) {
    throw new SignalRangeError('x.length', x.length, `the decimation filters need ${needed} samples or more`);
  }
  if (plan.factor === 1) return x.slice();
  const out = new Float64Array(plan.outputLength(x.length));
  // Tile by tile through the whole cascade: what lies between the stages stays in the cache.
  const tile = Math.min(out.length, Math.max(256, Math.ceil(16_384 / plan.factor)));
  const between: Float64Array[] = [];
  let length = plan.inputLength(tile);
  for (const stage of plan.stages.slice(0, -1)) {
    length = stageOutputs(stage, length);
    between.push(new Float64Array(length));
  }
  for (let from = 0; from < out.length; from += tile) {
    const to = Math.min(out.length, from + tile);
    const start = from * plan.factor;
    let samples = x.subarray(start, start + plan.inputLength(to - from));
    plan.stages.forEach((stage, s) => {
      const target = between[s]?.subarray(0, stageOutputs(stage, samples.length)) ?? out.subarray(from, to);
      runStage(stage, samples, target);
      samples = target;
    });
  }
  return out;
}

function stageOutputs({ factor, kernel }: Stage, inputs: number): number {
  return Math.floor((inputs - 1 - 2 * kernel.half) / factor) + 1;
}

/** Four taps pairs at a time over all outputs: long loops, weights in registers. */
function runStage({ factor, kernel }: Stage, x: Float64Array, out: Float64Array): void {
  const { half, offsets, weights } = kernel;
  out.fill(0);
  let j = 0;
  for (; j + 4 <= weights.length; j += 4) addFourPairs(out, x, half, factor, offsets, weights, j);
  for (; j < weights.length; j++) addPair(out, x, half, factor, offsets[j]!, weights[j]!);
}

function addFourPairs(
  out: Float64Array,
  x: Float64Array,
  half: number,
  factor: number,
  offsets: Int32Array,
  weights: Float64Array,
  j: number,
): void {
  const [a, b, c, d] = [offsets[j]!, offsets[j + 1]!, offsets[j + 2]!, offsets[j + 3]!];
  const [u, v, w, z] = [weights[j]!, weights[j + 1]!, weights[j + 2]!, weights[j + 3]!];
  for (let i = 0, k = half; i < out.length; i++, k += factor) {
    out[i] =
      out[i]! +
      u * (x[k - a]! + x[k + a]!) +
      v * (x[k - b]! + x[k + b]!) +
      w * (x[k - c]! + x[k + c]!) +
      z * (x[k - d]! + x[k + d]!);
  }
}

function addPair(
  out: Float64Array,
  x: Float64Array,
  half: number,
  factor: number,
  offset: number,
  weight: number,
): void {
  for (let i = 0, k = half; i < out.length; i++, k += factor)
    out[i] = out[i]! + weight * (x[k - offset]! + x[k + offset]!);
}

function foldKernel(taps: Float64Array): Kernel {
  const middle = (taps.length - 1) / 2;
  const offsets = [0];
  for (let k = 1; k <= middle; k++) if (taps[middle + k] !== 0) offsets.push(k);
  return {
    half: offsets.at(-1)!,
    offsets: Int32Array.from(offsets),
    // The middle tap as a pair of halves.
    weights: Float64Array.from(offsets, (k) => (k === 0 ? taps[middle]! / 2 : taps[middle + k]!)),
  };
}

function primeFactors(n: number): number[] {
  const factors: number[] = [];
  let rest = n;
  for (let p = 2; p * p <= rest; p++) {
    for (; rest % p === 0; rest /= p) factors.push(p);
  }
  if (rest > 1) factors.push(rest);
  return factors;
}

/** Best order of the prime factors by estimated multiply-adds; `left` alone decides what remains, so it is memoised. */
function cheapestOrder({ rateHz, factor, fmaxHz, attenuationDb }: DecimationOptions): number[] {
  const known = new Map<number, { cost: number; order: number[] }>([[1, { cost: 0, order: [] }]]);
  const best = (left: number): { cost: number; order: number[] } => {
    const found = known.get(left);
    if (found !== undefined) return found;
    const stageRateHz = (rateHz * left) / factor;
    let choice = { cost: Number.POSITIVE_INFINITY, order: [] as number[] };
    for (const p of new Set(primeFactors(left))) {
      const stopHz = stageRateHz / p - fmaxHz;
      const taps = kaiserTaps({ rateHz: stageRateHz, passHz: fmaxHz, stopHz, attenuationDb });
      const rest = best(left / p);
      // Folded: half the taps, less every p-th, which is zero; per raw sample.
      const cost = ((taps / 2) * (1 - 1 / p) + 1) / ((factor / left) * p) + rest.cost;
      if (cost < choice.cost) choice = { cost, order: [p, ...rest.order] };
    }
    known.set(left, choice);
    return choice;
  };
  return best(factor).order;
}
