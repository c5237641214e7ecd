/**
 * Vibration of machines whose bearings are sound, with everything else wrong: what a bearing judgement must not take
 * for a defect. Seeded: the same seed gives the same record.
 */
import type { BearingRates } from '../../src/machine/bearing.ts';
import { Random } from '../../src/simulate/random.ts';
import { type Mode, Ringing } from '../../src/simulate/ringing.ts';

export interface HealthyRecord {
  readonly rateHz: number;
  readonly shaftHz: number;
  readonly mainsHz: 50 | 60;
  readonly rates: BearingRates;
  /** Fundamental of whatever else runs nearby; none: null. */
  readonly otherHz: number | null;
  readonly accelerationG: Float64Array;
}

interface Setting extends Omit<HealthyRecord, 'accelerationG' | 'otherHz'> {
  readonly samples: number;
}

interface Tone {
  readonly hz: number;
  readonly depth: number;
  readonly phase: number;
}

type Made = { readonly x: Float64Array; readonly otherHz?: number };

const between = (r: Random, low: number, high: number): number => low + (high - low) * r.uniform();
const count = (r: Random, low: number, high: number): number =>
  low + Math.floor(r.uniform() * (high - low + 1));
const logBetween = (r: Random, low: number, high: number): number =>
  Math.exp(between(r, Math.log(low), Math.log(high)));
const phase = (r: Random): number => between(r, 0, 2 * Math.PI);

/** 7 to 15 elements, d/D of 0.14 to 0.3: what fits on a pitch circle. */
function anyBearing(r: Random): BearingRates {
  for (;;) {
    const n = count(r, 7, 15);
    const ratio = between(r, 0.14, 0.3);
    if (ratio >= 0.98 * Math.sin(Math.PI / n)) continue;
    return {
      ftf: (1 - ratio) / 2,
      bsf: (1 - ratio ** 2) / (2 * ratio),
      bpfo: (n * (1 - ratio)) / 2,
      bpfi: (n * (1 + ratio)) / 2,
    };
  }
}

/** Gaussian noise through one to three resonances, RMS 1. */
function noise(r: Random, { samples, rateHz }: Setting): Float64Array {
  const x = new Float64Array(samples);
  const white = r.uniform();
  for (let i = 0; i < samples; i++) x[i] = white * r.gauss();
  for (let mode = count(r, 1, 3); mode > 0; mode--) {
    const z = Math.exp((-Math.PI * between(r, 40, 600)) / rateHz);
    const a1 = 2 * z * Math.cos((2 * Math.PI * between(r, 600, 0.42 * rateHz)) / rateHz);
    const gain = Math.sqrt(1 - z * z);
    let y1 = 0;
    let y2 = 0;
    for (let i = 0; i < samples; i++) {
      const y = a1 * y1 - z * z * y2 + gain * r.gauss();
      y2 = y1;
      y1 = y;
      x[i] = x[i]! + y;
    }
  }
  const rms = Math.sqrt(x.reduce((sum, v) => sum + v * v, 0) / samples);
  return x.map((v) => v / rms);
}

/** A fundamental and its harmonics, each weaker by a random part. */
function harmonics(r: Random, hz: number, n: number, depth: number): Tone[] {
  return Array.from({ length: n }, (_, h) => ({
    hz: hz * (h + 1),
    depth: depth * between(r, 0.4, 1) ** h * between(r, 0.5, 1),
    phase: phase(r),
  }));
}

function modulate(x: Float64Array, rateHz: number, tones: readonly Tone[]): Float64Array {
  const gain = new Float64Array(x.length).fill(1);
  for (const tone of tones) {
    const step = (2 * Math.PI * tone.hz) / rateHz;
    for (let i = 0; i < x.length; i++) gain[i] = gain[i]! + tone.depth * Math.cos(step * i + tone.phase);
  }
  return x.map((v, i) => v * Math.max(0, gain[i]!));
}

function modes(r: Random, rateHz: number): Mode[] {
  return Array.from({ length: count(r, 1, 3) }, () => ({
    hz: between(r, 700, 0.42 * rateHz),
    damping: between(r, 0.01, 0.06),
    gain: between(r, 0.3, 1),
  }));
}

function addImpacts(
  x: Float64Array,
  rateHz: number,
  timesS: readonly number[],
  size: (s: number) => number,
  ring: Mode[],
): void {
  const ringing = new Ringing(ring, rateHz);
  let at = 0;
  for (const time of timesS) {
    const next = Math.ceil(time * rateHz);
    if (next >= x.length) break;
    ringing.render(x, at, next);
    at = next;
    ringing.strike(size(time), next / rateHz - time);
  }
  ringing.render(x, at, x.length);
}

/** Impacts at one rate, up to 2 % of random spacing that adds up as in a slipping bearing. */
function train(r: Random, { samples, rateHz, shaftHz }: Setting, hz: number): Float64Array {
  const x = new Float64Array(samples);
  const spread = r.uniform() < 0.5 ? 0 : between(r, 0, 0.02);
  const times: number[] = [];
  for (let t = r.uniform() / hz; t < samples / rateHz; t += (1 + spread * r.gauss()) / hz)
    times.push(Math.max(0, t));
  const size = logBetween(r, 2, 30);
  const swing = r.uniform();
  const at = phase(r);
  addImpacts(
    x,
    rateHz,
    times,
    (t) => size * (1 + swing * Math.cos(2 * Math.PI * shaftHz * t + at)),
    modes(r, rateHz),
  );
  return x;
}

/** An order that no part of the bearing has, at three times what slip explains, nor as a multiple or a fraction. */
function foreignOrder(r: Random, { ftf, bsf, bpfo, bpfi }: BearingRates): number {
  for (;;) {
    const order = between(r, 0.5, 12);
    const near = [bpfo, bpfi, 2 * bsf, ftf].some((own) =>
      [1, 2, 3].some((h) => [1, 2, 3].some((d) => Math.abs((order * d) / (own * h) - 1) < 0.03)),
    );
    if (!near) return order;
  }
}

const makers = {
  noise: (r: Random, s: Setting): Made => ({ x: noise(r, s) }),
  'shaft modulation': (r: Random, s: Setting): Made => ({
    x: modulate(noise(r, s), s.rateHz, harmonics(r, s.shaftHz, count(r, 1, 8), between(r, 0.2, 1))),
  }),
  rub: (r: Random, s: Setting): Made => {
    // Once a turn, or every second or third turn, as rubs do.
    const x = noise(r, s);
    const rubbing = noise(r, s);
    const hz = s.shaftHz / [1, 1, 1, 2, 3][count(r, 0, 4)]!;
    const duty = between(r, 0.05, 0.5);
    const size = between(r, 0.5, 6);
    const uneven = between(r, 0, 0.3);
    const start = r.uniform();
    let turn = -1;
    let gain = 1;
    for (let i = 0; i < s.samples; i++) {
      const turns = (hz * i) / s.rateHz + start;
      if (Math.floor(turns) !== turn) {
        turn = Math.floor(turns);
        gain = 1 + uneven * r.gauss();
      }
      const part = (turns - turn) / duty;
      if (part < 1) x[i] = x[i]! + size * gain * Math.sin(Math.PI * part) * rubbing[i]!;
    }
    return { x };
  },
  'random impacts': (r: Random, s: Setting): Made => {
    const x = noise(r, s);
    const hz = logBetween(r, 0.5, 200);
    const times: number[] = [];
    for (let t = r.exponential() / hz; t < s.samples / s.rateHz; t += r.exponential() / hz) times.push(t);
    const size = between(r, 2, 30);
    addImpacts(x, s.rateHz, times, () => size * r.exponential(), modes(r, s.rateHz));
    return { x };
  },
  'twice-mains hum': (r: Random, s: Setting): Made => {
    // The grid is off its nominal frequency by some 0.05 %.
    const hz = 2 * s.mainsHz * (1 + 0.0005 * r.gauss());
    const tones = harmonics(r, hz, count(r, 1, 4), between(r, 0.2, 1));
    if (r.uniform() < 0.3) tones.push(...harmonics(r, s.shaftHz, 3, between(r, 0.1, 0.6)));
    const x = modulate(noise(r, s), s.rateHz, tones);
    if (r.uniform() < 0.5) {
      const size = between(r, 0.1, 1.2);
      for (let h = 5; h * hz < 0.4 * s.rateHz; h++) {
        const a = size * r.uniform();
        const at = phase(r);
        for (let i = 0; i < s.samples; i++)
          x[i] = x[i]! + a * Math.cos((2 * Math.PI * h * hz * i) / s.rateHz + at);
      }
    }
    return { x };
  },
  'second shaft': (r: Random, s: Setting): Made => {
    const otherHz = s.shaftHz * between(r, 0.3, 4);
    const own = harmonics(r, otherHz, count(r, 1, 5), between(r, 0.2, 1));
    const swing = between(r, 0, 0.6);
    const sidebands = own.flatMap((tone) =>
      [-1, 1].map((side) => ({
        hz: Math.abs(tone.hz + side * s.shaftHz),
        depth: tone.depth * swing,
        phase: phase(r),
      })),
    );
    const tones = [...own, ...sidebands, ...harmonics(r, s.shaftHz, 2, swing)];
    return { x: modulate(noise(r, s), s.rateHz, tones), otherHz };
  },
  'impacts at a foreign order': (r: Random, s: Setting): Made => {
    const x = train(r, s, foreignOrder(r, s.rates) * s.shaftHz);
    const background = noise(r, s);
    return { x: x.map((v, i) => v + background[i]!) };
  },
  bursts: (r: Random, s: Setting): Made => {
    const x = noise(r, s);
    const loud = noise(r, s);
    for (let n = count(r, 1, 30); n > 0; n--) {
      const from = Math.floor(r.uniform() * s.samples);
      const length = Math.floor(s.rateHz * logBetween(r, 0.005, 0.6));
      const size = between(r, 1, 15);
      for (let i = 0; i < length && from + i < s.samples; i++)
        x[from + i] = x[from + i]! + size * Math.sin((Math.PI * i) / length) * loud[from + i]!;
    }
    return { x };
  },
  'tones a foreign distance apart': (r: Random, s: Setting): Made => {
    // As an inverter's switching frequency with its sidebands.
    const x = noise(r, s);
    const apartHz = foreignOrder(r, s.rates) * s.shaftHz;
    const carrierHz = between(r, 1500, 0.3 * s.rateHz);
    const size = logBetween(r, 0.5, 5);
    for (let k = -3; k <= 3; k++) {
      const a = size * r.uniform();
      const at = phase(r);
      const step = (2 * Math.PI * (carrierHz + k * apartHz)) / s.rateHz;
      for (let i = 0; i < s.samples; i++) x[i] = x[i]! + a * Math.cos(step * i + at);
    }
    return { x };
  },
} satisfies Record<string, (r: Random, s: Setting) => Made>;

export type HealthyKind = keyof typeof makers;
export const healthyKinds = Object.keys(makers) as HealthyKind[];

/** A record of one kind, 4.5 to 6 s long. */
export function healthyRecord(kind: HealthyKind, seed: number): HealthyRecord {
  const r = Random.stream(seed, kind);
  const rateHz = [6400, 8192, 10_240][count(r, 0, 2)]!;
  const setting: Setting = {
    rateHz,
    samples: Math.round(rateHz * between(r, 4.5, 6)),
    shaftHz: between(r, 12, 50),
    mainsHz: r.uniform() < 0.5 ? 50 : 60,
    rates: anyBearing(r),
  };
  const { x, otherHz = null } = makers[kind](r, setting);
  return {
    rateHz,
    shaftHz: setting.shaftHz,
    mainsHz: setting.mainsHz,
    rates: setting.rates,
    otherHz,
    accelerationG: x,
  };
}
