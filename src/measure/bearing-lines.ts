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

/** The line nearest to what is expected: the strongest maximum within the slip that is normal. */
export function findBearingLine(
  s: EnvelopeSpectrum,
  name: LineName,
  expected: number,
  mean: number,
): FoundLine {
  const { spectrum } = s;
  const reachHz = Math.max(SLIP[name] * expected, 0.75 * spectrum.lineHz);
  const bin = strongestMaximum(s, expected, reachHz);
  if (bin === null || !(mean > 0)) {
    return {
      line: {
        expected_hz: expected,
        hz: null,
        line: null,
        over_floor_db: null,
        modulation: null,
        harmonics: 0,
      },
      floor: null,
    };
  }
  const { hz, amplitude } = lineAmplitude(spectrum, bin);
  const floor = s.floor[bin]!;
  const overFloorDb = 10 * Math.log10(amplitude / floor);
  let harmonics = overFloorDb >= HARMONIC_OVER_FLOOR_DB ? 1 : 0;
  for (let h = 2; harmonics > 0 && h * hz < s.fmaxHz; h++) {
    const at = strongestMaximum(s, h * hz, 0.75 * spectrum.lineHz);
    if (at !== null && 10 * Math.log10(s.amplitudes[at]! / s.floor[at]!) >= HARMONIC_OVER_FLOOR_DB)
      harmonics++;
  }
  return {
    line: {
      expected_hz: expected,
      hz,
      line: amplitude,
      over_floor_db: floor > 0 ? overFloorDb : null,
      modulation: amplitude / mean,
      harmonics,
    },
    floor,
  };
}

function strongestMaximum(s: EnvelopeSpectrum, hz: number, reachHz: number): number | null {
  const { binHz } = s.spectrum;
  const bins = localMaxima(s.amplitudes, {
    from: Math.max(1, Math.ceil((hz - reachHz) / binHz)),
    to: Math.floor((hz + reachHz) / binHz),
  });
  let best: number | null = null;
  for (const bin of bins) if (best === null || s.amplitudes[bin]! > s.amplitudes[best]!) best = bin;
  return best;
}
