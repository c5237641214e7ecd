/** The lines of one bearing in an envelope spectrum, as a reading states them. */

import type { BearingRates } from '../machine/bearing.ts';
import { localMaxima } from '../signal/peaks.ts';
import { lineAmplitude } from '../signal/spectrum.ts';
import type { EnvelopeSpectrum } from './envelope-spectrum.ts';
import type { BearingLine } from './reading.ts';

/** 1 to 2 % of slip is normal (Smith and Randall 2015, MSSP 64-65, p. 102); an element slips most. */
const SLIP = { bpfo: 0.015, bpfi: 0.015, bsf: 0.025, ftf: 0.015 } as const;
/** A harmonic counts from 4.5 dB over the floor: what noise alone seldom gives at one chosen place. */
const HARMONIC_OVER_FLOOR_DB = 4.5;

export type LineName = 'bpfo' | 'bpfi' | 'bsf' | 'ftf';
export const lineNames: readonly LineName[] = ['bpfo', 'bpfi', 'bsf', 'ftf'];
/** As people call them; the reading's `bsf` is the line at twice BSF. */
export const lineTitles: Readonly<Record<LineName, string>> = {
  bpfo: 'BPFO',
  bpfi: 'BPFI',
  bsf: '2xBSF',
  ftf: 'FTF',
};

/** Where a bearing's lines are expected, in hertz. */
export function expectedHz(rates: BearingRates, shaftHz: number): Record<LineName, number> {
  return {
    bpfo: rates.bpfo * shaftHz,
    bpfi: rates.bpfi * shaftHz,
    bsf: 2 * rates.bsf * shaftHz,
    ftf: rates.ftf * shaftHz,
  };
}

export interface FoundLine {
  readonly line: BearingLine;
  /** Local median of the spectrum there; null where no line was found. */
  readonly floor: number | null;
}

/**
 * The level at an expected place: that of the strongest maximum within the slip that is normal, or where there is none, the
 * highest the spectrum reaches there.
 */
export function findBearingLine(
  s: EnvelopeSpectrum,
  name: LineName,
  expected: number,
  mean: number,
): FoundLine {
  const { spectrum } = s;
  const reachHz = Math.max(SLIP[name] * expected, 0.75 * spectrum.lineHz);
  const bins = binsWithin(s, expected, reachHz);
  const peak = strongest(s, localMaxima(s.amplitudes, bins));
  const bin = peak ?? strongest(s, everyBin(bins));
  if (bin === null || !(mean > 0)) {
    const none = { hz: null, line: null, over_floor_db: null, modulation: null, harmonics: 0 };
    return { line: { expected_hz: expected, ...none }, floor: null };
  }
  const { hz, amplitude } =
    peak === null ? { hz: null, amplitude: s.amplitudes[bin]! } : lineAmplitude(spectrum, bin);
  const floor = s.floor[bin]!;
  return {
    line: {
      expected_hz: expected,
      hz,
      line: amplitude,
      over_floor_db: floor > 0 && amplitude > 0 ? 10 * Math.log10(amplitude / floor) : null,
      modulation: amplitude / mean,
      harmonics: hz === null ? 0 : harmonicsOf(s, hz, amplitude / floor),
    },
    floor,
  };
}

/** Multiples of a line that stand above the floor, itself included; 0 where it does not. */
function harmonicsOf(s: EnvelopeSpectrum, hz: number, overFloor: number): number {
  const least = 10 ** (HARMONIC_OVER_FLOOR_DB / 10);
  if (!(overFloor >= least)) return 0;
  let count = 1;
  for (let multiple = 2 * hz; multiple < s.fmaxHz; multiple += hz) {
    const at = strongest(s, localMaxima(s.amplitudes, binsWithin(s, multiple, 0.75 * s.spectrum.lineHz)));
    if (at !== null && s.amplitudes[at]! >= least * s.floor[at]!) count++;
  }
  return count;
}

function binsWithin(s: EnvelopeSpectrum, hz: number, reachHz: number): { from: number; to: number } {
  const { binHz } = s.spectrum;
  return {
    from: Math.max(1, Math.ceil((hz - reachHz) / binHz)),
    to: Math.min(s.amplitudes.length - 2, Math.floor((hz + reachHz) / binHz)),
  };
}

function everyBin({ from, to }: { from: number; to: number }): number[] {
  return Array.from({ length: Math.max(0, to - from + 1) }, (_, i) => from + i);
}

function strongest(s: EnvelopeSpectrum, bins: readonly number[]): number | null {
  let best: number | null = null;
  for (const bin of bins) if (best === null || s.amplitudes[bin]! > s.amplitudes[best]!) best = bin;
  return best;
}
