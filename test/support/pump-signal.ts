/**
 * Counts of a pump with known content, from closed formulas: a tone of known velocity, the knocks of a bearing's outer
 * race as ringing impulses, and noise. Written for the tests alone, so that the simulator's errors do not cancel.
 */

export interface PumpSignal {
  rateHz: number;
  seconds: number;
  /** Acceleration in g of one count. */
  gPerCount: number;
  tone: { hz: number; velocityMmS: number };
  knocks: { hz: number; peakG: number; ringHz: number; decayS: number } | null;
  noiseG: number;
  seed: number;
}

/** Park and Miller's minimal standard generator (1988), in (0, 1). */
export function uniform(seed: number): () => number {
  let state = seed % 2147483647;
  return () => {
    state = (state * 48271) % 2147483647;
    return state / 2147483647;
  };
}

export function pumpCounts(signal: PumpSignal): Int32Array {
  const { rateHz, seconds, gPerCount, tone, knocks, noiseG } = signal;
  const n = Math.round(rateHz * seconds);
  const g = new Float64Array(n);
  const random = uniform(signal.seed);
  // v = A/(2πf): an RMS velocity of V mm/s is a peak acceleration of √2·2πf·V/1000 m/s²; 1 g = 9.80665 m/s².
  const amplitudeG = (Math.SQRT2 * 2 * Math.PI * tone.hz * tone.velocityMmS) / 1000 / 9.80665;
  for (let i = 0; i < n; i++) {
    const gaussian = Math.sqrt(-2 * Math.log(random())) * Math.cos(2 * Math.PI * random());
    g[i] = amplitudeG * Math.sin((2 * Math.PI * tone.hz * i) / rateHz) + noiseG * gaussian;
  }
  if (knocks) addKnocks(g, rateHz, knocks, random);
  return Int32Array.from(g, (value) => Math.max(-32767, Math.min(32766, Math.round(value / gPerCount))));
}

function addKnocks(
  g: Float64Array,
  rateHz: number,
  knocks: NonNullable<PumpSignal['knocks']>,
  random: () => number,
) {
  const ring = Math.round(8 * knocks.decayS * rateHz);
  // Each interval slips by up to 1 %, as rolling elements do.
  for (let at = 0; at < g.length / rateHz; at += (1 / knocks.hz) * (1 + 0.01 * (2 * random() - 1))) {
    const first = Math.ceil(at * rateHz);
    for (let i = first; i < Math.min(g.length, first + ring); i++) {
      const t = i / rateHz - at;
      g[i]! += knocks.peakG * Math.exp(-t / knocks.decayS) * Math.sin(2 * Math.PI * knocks.ringHz * t);
    }
  }
}
