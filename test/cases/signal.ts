/** Counts for the cases: a tone whose velocity and frequency follow the story, knocks of a bearing, and a little noise. */
import { uniform } from '../support/pump-signal.ts';

/** 16 bit over 16 g. */
export const fullScaleG = 16;

export interface Story {
  rateHz: number;
  seconds: number;
  /** Shaft speed at second `t`, Hz; 25 unless given. */
  shaftHz?: (t: number) => number;
  /** Velocity at shaft speed, mm/s RMS; 0: at rest. */
  mmS: (t: number) => number;
  /** An outer race: knocks at so many times the shaft speed, of this peak in g, ringing at 3200 Hz. */
  knocks?: { orders: number; peakG: (t: number) => number };
}

/** What the recording of a case is made of. */
export interface Case {
  points: string;
  rateHz: number;
  counts: () => Int32Array[];
}

export function tell({ rateHz, seconds, shaftHz = () => 25, mmS, knocks }: Story): Int32Array {
  const random = uniform(7);
  const n = rateHz * seconds;
  const g = new Float64Array(n);
  let turns = 0;
  let knocked = 0;
  for (let i = 0; i < n; i++) {
    const t = i / rateHz;
    const hz = shaftHz(t);
    turns += hz / rateHz;
    // An RMS velocity of V mm/s at f is a peak acceleration of √2·2πf·V/1000 m/s²; 1 g = 9.80665 m/s².
    const peakG = (Math.SQRT2 * 2 * Math.PI * hz * mmS(t)) / 1000 / 9.80665;
    g[i]! += peakG * Math.sin(2 * Math.PI * turns) + 0.006 * (random() - 0.5);
    if (knocks && turns * knocks.orders >= knocked) {
      // Each interval slips by up to 1 %, as rolling elements do.
      knocked = turns * knocks.orders + 1 + 0.01 * (2 * random() - 1);
      addKnock(g, i, rateHz, knocks.peakG(t));
    }
  }
  return Int32Array.from(g, (value) =>
    Math.max(-32_767, Math.min(32_766, Math.round((value / fullScaleG) * 32_768))),
  );
}

function addKnock(g: Float64Array, first: number, rateHz: number, peakG: number): void {
  const decayS = 0.0008;
  const end = Math.min(g.length, first + Math.round(8 * decayS * rateHz));
  for (let i = first; i < end; i++) {
    const t = (i - first) / rateHz;
    g[i]! += peakG * Math.exp(-t / decayS) * Math.sin(2 * Math.PI * 3200 * t);
  }
}
