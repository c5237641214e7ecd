/** The envelope part of a reading: levels at the bearing frequencies, and which bearing part they accuse. */

import { knownSourceAt } from '../machine/evidence-lines.ts';
import { type RecordTransform, recordTransform } from '../signal/envelope.ts';
import { kurtogram } from '../signal/kurtogram.ts';
import { median } from '../signal/peaks.ts';
import { expectedHz, type FoundLine, findBearingLine, lineNames, lineTitles } from './bearing-lines.ts';
import { judgeRecord } from './envelope-judgement.ts';
import { type EnvelopeSpectrum, envelopeOfBand, spectrumOfEnvelope } from './envelope-spectrum.ts';
import type { PlannedBearing, PointPlan } from './plan.ts';
import { ENVELOPE_EDGE_S, type EnvelopePlan, LEAST_TURNS, longestBlockS } from './plan-envelope.ts';
import { hz } from './plan-notes.ts';
import type { EnvelopeReading } from './reading.ts';

/** The band filter needs most of what the plan leaves at each end, the decimation after it the rest. */
export const CUT_S = 0.7 * ENVELOPE_EDGE_S;
/** Fewer lines than this tell nothing apart. */
const LEAST_LINES = 100;
/** A bearing is judged on blocks of this many turns where the record allows: lines 1/100 of an order apart. */
const WANTED_TURNS = 100;
/** Two lines closer than the half width of a Hann main lobe look like one. */
const TELL_APART_LINES = 2;
/** Bands down to 1/16 of the spectrum: narrower ones follow single tones. */
const KURTOGRAM_LEVELS = 4;

export interface EnvelopeMeasurement {
  /** null: the plan has no envelope, or the record is too short for one. */
  readonly reading: EnvelopeReading | null;
  readonly why: string[];
  /** Whether `why` makes the reading uncertain; false: it only tells why a figure is null or doubtful. */
  readonly uncertain: boolean;
}

/**
 * Measures the squared envelope of a record and judges the bearings of its point.
 *
 * @param accelerationG the whole record at the full rate, in g
 * @param rateHz the rate that the record was measured with
 * @param shaftHz speed of the shaft at the point; null: unknown, then no bearing line is looked for
 * @param otherHz speeds of other shafts nearby: lines at their multiples are theirs and no bearing's
 */
export function measureEnvelope(
  plan: PointPlan,
  accelerationG: Float64Array,
  rateHz: number,
  shaftHz: number | null,
  otherHz: readonly number[] = [],
): EnvelopeMeasurement {
  const settings = plan.envelope;
  if (settings === null) return { reading: null, why: [], uncertain: false };
  const { fmaxHz } = settings;
  const doubts: string[] = [];

  const longestS = longestBlockS(accelerationG.length, rateHz);
  const blockS = Math.min(settings.blockS, longestS);
  // Whether a record suffices is told at the nominal rate, at which it was planned: else that hangs on a clock's drift.
  const suffices = longestBlockS(accelerationG.length, plan.rateHz) >= settings.blockS * (1 - 1e-9);
  if (!suffices && blockS * fmaxHz < LEAST_LINES) {
    return { reading: null, why: ['record too short for an envelope'], uncertain: true };
  }
  if (!suffices) {
    doubts.push(`record too short: envelope lines of ${hz(1 / blockS)} instead of ${hz(settings.lineHz)}`);
  }
  const transform = recordTransform(accelerationG, { rateHz, cutS: CUT_S });
  const bandHz = settings.auto ? impulsiveBand(transform, settings) : settings.bandHz;
  const envelope = envelopeOfBand(transform, bandHz, fmaxHz);
  const spectrum = spectrumOfEnvelope(envelope, blockS, fmaxHz);
  const reading: EnvelopeReading = {
    unit: 'g²',
    band_hz: [bandHz[0], bandHz[1]],
    mean: envelope.mean,
    floor: median(spectrum.amplitudes),
    defect: null,
    bpfo: null,
    bpfi: null,
    bsf: null,
    ftf: null,
  };
  const bearings = plan.bearings.filter(({ multiples }) => multiples !== null);
  if (bearings.length === 0) return { reading, why: doubts, uncertain: doubts.length > 0 };
  for (const { id, multiples } of bearings) {
    if (!multiples!.certain) doubts.push(`bearing ${id}: geometry unknown, its lines are rules of thumb`);
  }
  if (shaftHz === null) {
    doubts.push('speed unknown: no bearing line can be looked for');
    return { reading, why: doubts, uncertain: true };
  }

  const foreignHz = [2 * plan.mainsHz, ...otherHz];
  const judgedS = Math.min(WANTED_TURNS / shaftHz, longestS);
  let shown = bearings[0]!;
  if (judgedS * shaftHz < LEAST_TURNS) {
    doubts.push(
      `record too short to judge a bearing: ${Math.floor(judgedS * shaftHz)} turns a block, ${LEAST_TURNS} are needed`,
    );
  } else {
    const measured = { ...envelope, askedHz: bandHz };
    const verdict = judgeRecord(
      { transform, bandHz: settings.bandHz, measured, fmaxHz, blockS: judgedS, shaftHz, foreignHz },
      bearings,
    );
    shown = verdict?.bearing ?? shown;
    reading.defect = verdict?.accusation.part ?? null;
  }
  const remarks = fillLines(reading, shown, { spectrum, mean: envelope.mean, shaftHz, foreignHz });
  remarks.push(...tooClose(bearings, shaftHz, spectrum.spectrum.lineHz));
  return { reading, why: [...doubts, ...remarks], uncertain: doubts.length > 0 };
}

/** Fills in the four lines of one bearing. @returns why one of them is null. */
function fillLines(
  reading: EnvelopeReading,
  bearing: PlannedBearing,
  from: { spectrum: EnvelopeSpectrum; mean: number; shaftHz: number; foreignHz: readonly number[] },
): string[] {
  const { spectrum, mean, shaftHz, foreignHz } = from;
  const { lineHz } = spectrum.spectrum;
  const remarks: string[] = [];
  let strongest: FoundLine | null = null;
  reading.bearing = bearing.id;
  for (const [name, expected] of Object.entries(expectedHz(bearing.multiples!, shaftHz))) {
    const line = name as keyof typeof lineTitles;
    const title = `${lineTitles[line]} of ${bearing.id} (${hz(expected)})`;
    const source = knownSourceAt(expected, shaftHz, foreignHz, lineHz);
    if (expected > spectrum.fmaxHz) {
      remarks.push(`${title} lies above the envelope's Fmax`);
    } else if (source !== null) {
      remarks.push(
        `${title} lies on ${hz(source)}, a multiple of the shaft, of another shaft or of twice mains`,
      );
    } else {
      const found = findBearingLine(spectrum, line, expected, mean);
      reading[line] = found.line;
      if ((found.line.line ?? 0) > (strongest?.line.line ?? 0)) strongest = found;
    }
  }
  reading.floor = strongest?.floor ?? reading.floor;
  return remarks;
}

/** Pairs of bearing frequencies that the lines cannot tell apart; the same type of bearing twice is no such pair. */
function tooClose(bearings: readonly PlannedBearing[], shaftHz: number, lineHz: number): string[] {
  const all = bearings.flatMap(({ id, multiples }) =>
    lineNames.map((name) => ({
      title: `${lineTitles[name]} of ${id}`,
      hz: expectedHz(multiples!, shaftHz)[name],
    })),
  );
  return all.flatMap((a, i) =>
    all
      .slice(i + 1)
      .filter((b) => a.hz !== b.hz && Math.abs(a.hz - b.hz) < TELL_APART_LINES * lineHz)
      .map(
        (b) =>
          `${a.title} (${hz(a.hz)}) and ${b.title} (${hz(b.hz)}) are too close for lines of ${hz(lineHz)}`,
      ),
  );
}

/** The band within the limits of the plan where the signal is most impulsive; the whole where none can be chosen. */
function impulsiveBand(transform: RecordTransform, settings: EnvelopePlan): readonly [number, number] {
  const [minHz, maxHz] = settings.bandHz;
  const { rateHz, samples } = transform;
  // Bands of rate/32 always fit a range twice as wide, and a kurtosis wants some samples of each.
  if (maxHz - minHz < rateHz / 16 || samples < 16_384) return settings.bandHz;
  const { table } = kurtogram(transform, { minHz, maxHz, maxLevel: KURTOGRAM_LEVELS });
  // A band narrower than the envelope's spectrum cannot show its lines.
  const wide = table.filter((band) => band.bandHz[1] - band.bandHz[0] >= settings.fmaxHz);
  const first = wide[0];
  if (first === undefined) return settings.bandHz;
  return wide.reduce((a, b) => (b.kurtosis > a.kurtosis ? b : a), first).bandHz;
}
