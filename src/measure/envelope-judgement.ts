/** Which bearing of a point, and which part of it, the envelope of a record accuses. */

import { type Accusation, judgeBearing } from '../machine/defect-evidence.ts';
import { type BandLines, withoutKnownSources } from '../machine/evidence-lines.ts';
import type { RecordTransform } from '../signal/envelope.ts';
import { evidenceBands } from './envelope-bands.ts';
import { type BandEnvelope, envelopeOfBand, linesOf, spectrumOfEnvelope } from './envelope-spectrum.ts';
import type { PlannedBearing } from './plan.ts';

/** The spin of a rolling element smears its lines: they are sought with blocks this much shorter. */
const COARSE = 4;
/** Lines count from 9 dB over the floor (20·log10); averaged four times as often, from 6 dB. */
const LINE_OVER_FLOOR = { fine: 10 ** (9 / 20), coarse: 10 ** (6 / 20) } as const;

export interface JudgedRecord {
  readonly transform: RecordTransform;
  /** The widest band that settings, rate and sensor leave. */
  readonly bandHz: readonly [number, number];
  /** The band of the reading, measured already. */
  readonly measured: BandEnvelope & { readonly askedHz: readonly [number, number] };
  readonly fmaxHz: number;
  /** Blocks of the fine spectrum. */
  readonly blockS: number;
  readonly shaftHz: number;
  readonly foreignHz: readonly number[];
}

export interface BearingVerdict {
  readonly bearing: PlannedBearing;
  readonly accusation: Accusation;
}

/** The strongest accusation of all bearings whose geometry is known; null: none. */
export function judgeRecord(
  record: JudgedRecord,
  bearings: readonly PlannedBearing[],
): BearingVerdict | null {
  const known = bearings.filter(({ multiples }) => multiples?.certain === true);
  if (known.length === 0) return null;
  const bands = linesOfBands(record);
  let verdict: BearingVerdict | null = null;
  for (const bearing of known) {
    const accusation = judgeBearing(bands, bearing.multiples!, record.shaftHz);
    if (accusation !== null && accusation.score > (verdict?.accusation.score ?? 0)) {
      verdict = { bearing, accusation };
    }
  }
  return verdict;
}

function linesOfBands(record: JudgedRecord): BandLines[] {
  const { transform, measured, fmaxHz, blockS, shaftHz, foreignHz } = record;
  const bands = evidenceBands(record.bandHz).filter((bandHz) => !isSame(bandHz, measured.askedHz));
  const envelopes = [measured, ...bands.map((bandHz) => envelopeOfBand(transform, bandHz, fmaxHz))];
  return envelopes
    .filter(({ mean }) => mean > 0)
    .map((envelope) => {
      const lines = (seconds: number, overFloor: number) => {
        const spectrum = spectrumOfEnvelope(envelope, seconds, fmaxHz);
        return withoutKnownSources(linesOf(spectrum, envelope.mean, overFloor), shaftHz, foreignHz);
      };
      return {
        bandHz: envelope.bandHz,
        fine: lines(blockS, LINE_OVER_FLOOR.fine),
        coarse: lines(blockS / COARSE, LINE_OVER_FLOOR.coarse),
      };
    });
}

function isSame(a: readonly [number, number], b: readonly [number, number]): boolean {
  return a[0] === b[0] && a[1] === b[1];
}
