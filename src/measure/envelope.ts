/** The envelope part of a reading: levels at the bearing frequencies, and which bearing part they accuse. */

import { type BearingVerdict, judgeBearing } from '../machine/defect-evidence.ts';
import { type BandLines, knownSourceAt, withoutKnownSources } from '../machine/evidence-lines.ts';
import { type RecordTransform, recordTransform } from '../signal/envelope.ts';
import { kurtogram } from '../signal/kurtogram.ts';
import { median } from '../signal/peaks.ts';
import {
  expectedHz,
  type FoundLine,
  findBearingLine,
  type LineName,
  lineNames,
  lineTitles,
} from './bearing-lines.ts';
import { evidenceBands } from './envelope-bands.ts';
import {
  type BandEnvelope,
  type EnvelopeSpectrum,
  envelopeOfBand,
  linesOf,
  spectrumOfEnvelope,
} from './envelope-spectrum.ts';
import type { PlannedBearing, PointPlan } from './plan.ts';
import { ENVELOPE_EDGE_S, type EnvelopePlan } from './plan-envelope.ts';
import { hz } from './plan-notes.ts';
import type { EnvelopeReading } from './reading.ts';

/** Blocks that a spectrum is averaged over at least; a record too short for that gets wider lines instead. */
const LEAST_AVERAGES = 2;
/** The spin of a rolling element smears its lines: they are sought with blocks this much shorter. */
const COARSE = 4;
/** Lines count from 9 dB over the floor (20·log10); averaged four times as often, from 6 dB. */
const LINE_OVER_FLOOR = { fine: 10 ** (9 / 20), coarse: 10 ** (6 / 20) } as const;
/** A bearing is judged on blocks of this many turns of the shaft where the record allows: lines 1/40 of an order apart. */
const WANTED_TURNS = 40;
/** With fewer, lines are so wide that a comb fits nearly anything. */
const LEAST_TURNS = 30;
/** Kurtogram: bands down to 1/16 of the spectrum, narrower ones follow single tones. */
const KURTOGRAM_LEVELS = 4;

export interface EnvelopeMeasurement {
  /** null: the plan has no envelope, or the record cannot give one. */
  readonly reading: EnvelopeReading | null;
  readonly why: string[];
  /** Whether `why` makes the reading uncertain; false: it only says why a figure is null. */
  readonly uncertain: boolean;
}

/**
 * Measures the squared envelope of a record and judges the bearings of its point.
 *
 * @param accelerationG the whole record at the full rate, in g
 * @param rateHz the rate that the record was measured with
 * @param shaftHz speed of the shaft at the point; null: unknown, then no bearing line is looked for
 * @param otherHz fundamentals of other shafts nearby, whose lines are theirs and no bearing's
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
  const whys = new Set<string>();
  let uncertain = false;
  const doubt = (reason: string): void => {
    whys.add(reason);
    uncertain = true;
  };

  const seconds = accelerationG.length / rateHz - 2 * ENVELOPE_EDGE_S;
  const longestS = seconds / (1 + (LEAST_AVERAGES - 1) / 2);
  const blockS = Math.min(settings.blockS, longestS);
  if (blockS * settings.fmaxHz < LEAST_LINES) {
    doubt(`record too short: no envelope from ${accelerationG.length} samples`);
    return { reading: null, why: [...whys], uncertain };
  }
  if (blockS < settings.blockS) {
    doubt(`record too short: envelope lines of ${hz(1 / blockS)} instead of ${hz(settings.lineHz)}`);
  }

  const transform = recordTransform(accelerationG, { rateHz, cutS: ENVELOPE_EDGE_S });
  const chosen = settings.auto ? impulsiveBand(transform, settings) : settings.bandHz;
  const envelope = envelopeOfBand(transform, chosen, settings.fmaxHz);
  const spectrum = spectrumOfEnvelope(envelope, blockS, settings.fmaxHz);
  const reading: EnvelopeReading = {
    unit: 'g²',
    band_hz: [chosen[0], chosen[1]],
    mean: envelope.mean,
    floor: median(spectrum.amplitudes),
    defect: null,
    bpfo: null,
    bpfi: null,
    bsf: null,
    ftf: null,
  };
  const bearings = plan.bearings.filter((bearing) => bearing.multiples !== null);
  if (bearings.length === 0) return { reading, why: [...whys], uncertain };
  if (shaftHz === null) {
    doubt('speed unknown: no bearing line can be looked for');
    return { reading, why: [...whys], uncertain };
  }

  const foreignHz = [2 * plan.mainsHz, ...otherHz];
  const sound = bearings.filter((bearing) => bearing.multiples!.certain);
  for (const bearing of bearings) {
    if (!sound.includes(bearing))
      doubt(`bearing ${bearing.id}: geometry unknown, its lines are rules of thumb`);
  }
  let verdict: { bearing: PlannedBearing; found: BearingVerdict } | null = null;
  const judgedS = Math.max(blockS, Math.min(WANTED_TURNS / shaftHz, longestS));
  if (judgedS * shaftHz < LEAST_TURNS) {
    doubt(
      `record too short to judge a bearing: blocks of ${Math.floor(judgedS * shaftHz)} turns, ${LEAST_TURNS} are needed`,
    );
  } else if (sound.length > 0 && envelope.mean > 0) {
    const bands = evidence(transform, settings, { chosen, envelope }, judgedS, shaftHz, foreignHz);
    for (const bearing of sound) {
      const found = judgeBearing(bands, bearing.multiples!, shaftHz);
      if (found.defect !== null && found.score > (verdict?.found.score ?? 0)) verdict = { bearing, found };
    }
  }
  const shown = verdict?.bearing ?? bearings[0]!;
  reading.bearing = shown.id;
  reading.defect = verdict?.found.defect ?? null;
  const isHidden = (name: LineName, expected: number): boolean => {
    const by = knownSourceAt(expected, shaftHz, foreignHz, spectrum.spectrum.lineHz);
    if (by !== null)
      whys.add(
        `${lineTitles[name]} of ${shown.id} (${hz(expected)}) lies on ${hz(by)}, a line of another source`,
      );
    return by !== null;
  };
  let strongest: FoundLine | null = null;
  const expected = expectedHz(shown.multiples!, shaftHz);
  for (const name of lineNames) {
    if (expected[name] > settings.fmaxHz || isHidden(name, expected[name])) continue;
    const found = findBearingLine(spectrum, name, expected[name], envelope.mean);
    reading[name] = found.line;
    if ((found.line.line ?? 0) > (strongest?.line.line ?? 0)) strongest = found;
  }
  reading.floor = strongest?.floor ?? reading.floor;
  return { reading, why: [...whys], uncertain };
}

/** Fewer lines than this tell nothing apart. */
const LEAST_LINES = 100;

/** The band within the limits of the plan where the signal is most impulsive. */
function impulsiveBand(transform: RecordTransform, settings: EnvelopePlan): readonly [number, number] {
  const [minHz, maxHz] = settings.bandHz;
  const { table } = kurtogram(transform, { minHz, maxHz, maxLevel: KURTOGRAM_LEVELS });
  // A band narrower than the envelope's spectrum cannot show its lines.
  const wide = table.filter((band) => band.bandHz[1] - band.bandHz[0] >= settings.fmaxHz);
  const best = wide.reduce((a, b) => (b.kurtosis > a.kurtosis ? b : a), wide[0]!);
  return best?.bandHz ?? settings.bandHz;
}

/** The lines of all bands, cleared of known sources. The chosen band is measured already. */
function evidence(
  transform: RecordTransform,
  settings: EnvelopePlan,
  done: { chosen: readonly [number, number]; envelope: BandEnvelope },
  blockS: number,
  shaftHz: number,
  foreignHz: readonly number[],
): BandLines[] {
  const bands = evidenceBands(settings.bandHz);
  if (settings.auto) bands.push([done.chosen[0], done.chosen[1]]);
  return bands.flatMap((bandHz): BandLines[] => {
    const isDone = bandHz[0] === done.chosen[0] && bandHz[1] === done.chosen[1];
    const envelope = isDone ? done.envelope : envelopeOfBand(transform, bandHz, settings.fmaxHz);
    if (!(envelope.mean > 0)) return [];
    const fine = spectrumOfEnvelope(envelope, blockS, settings.fmaxHz);
    const coarse = spectrumOfEnvelope(envelope, blockS / COARSE, settings.fmaxHz);
    const lines = (s: EnvelopeSpectrum, over: number) =>
      withoutKnownSources(linesOf(s, envelope.mean, over), shaftHz, foreignHz);
    return [
      { bandHz, fine: lines(fine, LINE_OVER_FLOOR.fine), coarse: lines(coarse, LINE_OVER_FLOOR.coarse) },
    ];
  });
}
