/**
 * From the settings of a point and the nominal sample rate to sizes: what a record must hold, how it is cut into
 * blocks, which bands its figures cover, and where the settings ask for more than the rate or the sensor carries.
 */

import { ForebayError } from '../config/errors.ts';
import type { Machine, Point } from '../config/station.ts';
import { type BearingMultiples, type BearingRates, bearingMultiples } from '../machine/bearing.ts';
import { synchronousHz } from '../machine/electrical.ts';
import { chooseFactor, type DecimationPlan, planDecimation } from '../signal/decimate.ts';
import { DISPLACEMENT_PERIODS } from '../signal/integrate.ts';
import type { WindowName } from '../signal/window.ts';
import {
  ENVELOPE_EDGE_S,
  type EnvelopePlan,
  LEAST_TURNS,
  longestBlockS,
  planEnvelope,
} from './plan-envelope.ts';
import {
  hz,
  LEAST_AVERAGES,
  noteFrequencies,
  PlanNotes,
  RATE_OVER_FMAX,
  range,
  tooLow,
} from './plan-notes.ts';

/** The filter keeps this much more than Fmax clean: a node's clock may be several percent slow. */
const CLOCK_SLACK = 1.05;
/** Stop band of the anti-alias filter: 80 dB must hold, with something to spare. */
export const ATTENUATION_DB = 82;
/** Below 600 r/min the overall band starts at 2 Hz (ISO 10816-3 Annex A). */
const SLOW_HZ = 10;
const OVERALL_HZ = { slow: 2, usual: 10, high: 1000 } as const;
/** A record must fit the rings and the transforms; two minutes of 100 kHz are about this. */
const MAX_RECORD_SAMPLES = 1 << 24;

/** Settings that no record can meet. */
export class PlanError extends ForebayError {
  constructor(key: string, message: string) {
    super('config.unmeasurable', `${key}: ${message}`);
    this.name = 'PlanError';
  }
}

/** Averaged spectrum of the decimated acceleration. */
interface SpectrumPlan {
  /** The decimation factor, and the rate after it. */
  readonly factor: number;
  readonly rateHz: number;
  /** As asked, or what the rate carries if that is lower. */
  readonly fmaxHz: number;
  readonly lines: number;
  readonly lineHz: number;
  readonly blockSamples: number;
  readonly averages: number;
  readonly window: WindowName;
  /** Raw samples at each end that only feed the filter. */
  readonly marginSamples: number;
  /** Raw samples that all averages need, margins included. */
  readonly rawSamples: number;
}

export interface PlannedBearing {
  readonly id: string;
  /** null: nothing is known of it. */
  readonly multiples: BearingMultiples | null;
  /** At the nominal speed; null: not known beforehand. */
  readonly nominalHz: BearingRates | null;
}

/** Speed of the shaft at the point, as far as the settings tell. */
interface PlannedShaft {
  readonly lowHz: number;
  readonly highHz: number;
  readonly nominalHz: number | null;
}

export interface PointPlan {
  readonly key: string;
  readonly point: Point;
  readonly machine: Pick<Machine, 'shaft' | 'running' | 'motor'>;
  /** Of the impeller on the point's shaft; null: unknown, or none for certain. */
  readonly vanes: number | null;
  readonly mainsHz: number;
  /** Nominal raw rate: it gives the sizes; a record's own rate gives its frequencies. */
  readonly rateHz: number;
  readonly stepSamples: number;
  readonly recordSamples: number;
  readonly spectrum: SpectrumPlan;
  /** Edges of `overall` at the nominal speed. */
  readonly overallHz: readonly [number, number];
  readonly accelerationHz: readonly [number, number];
  readonly envelope: EnvelopePlan | null;
  readonly shaft: PlannedShaft | null;
  /** Speeds of the machine's other shafts, over that of this point's. */
  readonly otherRatios: readonly number[];
  readonly bearings: readonly PlannedBearing[];
  /** What the settings ask for and cannot have, for whoever writes them. */
  readonly warnings: readonly string[];
  /** Those of them that make every reading uncertain. */
  readonly caveats: readonly string[];
}

/** Speed to reckon with where none is measured: the nominal one, or the slowest; null: the settings tell none. */
export function expectedShaftHz({ shaft }: Pick<PointPlan, 'shaft'>): number | null {
  return shaft?.nominalHz ?? shaft?.lowHz ?? null;
}

/** Half a percent that a speed is off does not put a machine of 600 r/min, or of 120, on the other side of a border. */
const SPEED_SLACK = 1.005;

/**
 * The speed by which borders are told, of the overall band and of a table's scope: that of the settings where they give
 * one, so that no figure comes and goes with the load; else the one at hand, leaning to the faster side.
 */
export function bordersHz(nominalHz: number | null, shaftHz: number | null): number | null {
  return nominalHz ?? (shaftHz === null ? null : shaftHz * SPEED_SLACK);
}

/** Nominal speed of the shaft at a point; null: the settings give none. */
export function nominalHz({ shaft }: Pick<Machine, 'shaft'>, ratio: number): number | null {
  return shaft?.kind === 'fixed' ? (shaft.rpm / 60) * ratio : null;
}

/** Edges of the overall velocity: from 10 Hz, or from 2 Hz for a shaft below 600 r/min, to 1000 Hz or Fmax. */
export function overallBandHz(shaftHz: number | null, fmaxHz: number): [number, number] {
  const low = shaftHz !== null && shaftHz < SLOW_HZ ? OVERALL_HZ.slow : OVERALL_HZ.usual;
  return [low, Math.min(OVERALL_HZ.high, fmaxHz)];
}

/**
 * Plans the measurement of one point.
 *
 * @param rateHz nominal sample rate of the node.
 * @param mainsHz frequency of the site's mains.
 * @throws PlanError where no record can meet the settings.
 */
export function planPoint(point: Point, machine: Machine, rateHz: number, mainsHz: number): PointPlan {
  if (!(Number.isFinite(rateHz) && rateHz > 0)) {
    throw new PlanError(point.key, `the sample rate must be above 0 Hz, not ${rateHz}`);
  }
  const notes = new PlanNotes();

  const shaft = plannedShaft(machine, point.ratio);
  const spectrum = planSpectrum(point, rateHz, notes);
  const overallHz = overallBandHz(expectedShaftHz({ shaft }), spectrum.fmaxHz);
  if (overallHz[1] < OVERALL_HZ.high) {
    notes.warn(`overall velocity ends at Fmax, ${hz(overallHz[1])}, instead of 1000 Hz`);
  }
  const coarse = tooLow(overallHz[0], spectrum, 'overall velocity');
  if (coarse !== null) notes.warn(`${coarse}: give more lines`);
  if (spectrum.window === 'rectangular') {
    notes.warn(
      'window rectangular leaks: displacement and velocity of slow shafts read wrong; hann does not',
    );
  }
  const usable = point.sensor.usableHz;
  if (usable !== null && (usable[0] > overallHz[0] || usable[1] < overallHz[1])) {
    notes.caution(
      `overall velocity wants ${range(overallHz)}, the sensor is usable over ${range(usable)}: its figures are uncertain`,
    );
  }
  const bearings = point.bearings.map((bearing): PlannedBearing => {
    const multiples = bearingMultiples(bearing);
    return { id: bearing.id, multiples, nominalHz: ratesAt(multiples, shaft?.nominalHz ?? null) };
  });
  const fastestHz = shaft?.nominalHz ?? shaft?.highHz ?? fastestUnknownHz(machine, point.ratio, mainsHz);
  const envelope = planEnvelope(point, highestBpfi(bearings) * fastestHz, rateHz, notes);

  const stepSamples = Math.max(1, Math.round(point.measure.everyS * rateHz));
  const envelopeS =
    envelope === null ? 0 : overlappedBlocks(envelope.blockS, envelope.averages) + 2 * ENVELOPE_EDGE_S;
  const recordSamples = Math.max(stepSamples, spectrum.rawSamples, Math.ceil(envelopeS * rateHz));
  if (recordSamples > MAX_RECORD_SAMPLES) {
    throw new PlanError(
      point.key,
      `a record of ${(recordSamples / rateHz).toFixed(0)} s is too long; ask for fewer lines, fewer averages or a shorter interval`,
    );
  }
  const plan = {
    key: point.key,
    point,
    machine: { shaft: machine.shaft, running: machine.running, motor: machine.motor },
    vanes: vanesOn(point, machine),
    mainsHz,
    rateHz,
    stepSamples,
    recordSamples,
    spectrum,
    overallHz,
    accelerationHz: accelerationBandHz(point, rateHz),
    envelope,
    shaft,
    otherRatios: otherRatios(point, machine),
    bearings,
  };
  noteFrequencies(plan, notes);
  noteLength(plan, notes);
  return { ...plan, warnings: notes.warnings, caveats: notes.caveats };
}

/** Notes figures for which the record is too short by the settings. */
function noteLength(plan: Omit<PointPlan, 'warnings' | 'caveats'>, notes: PlanNotes): void {
  const { recordSamples, rateHz, spectrum, overallHz, shaft, envelope, bearings } = plan;
  if ((recordSamples - 2 * spectrum.marginSamples) * overallHz[0] < DISPLACEMENT_PERIODS * rateHz) {
    notes.warn(
      `displacement peak to peak will be null: a record of ${(recordSamples / rateHz).toFixed(1)} s holds fewer than ${Math.ceil(DISPLACEMENT_PERIODS)} periods of ${hz(overallHz[0])}; give more lines or averages`,
    );
  }
  if (envelope === null || shaft === null) return;
  const turns = longestBlockS(recordSamples, rateHz) * shaft.lowHz;
  if (turns < LEAST_TURNS && bearings.some(({ multiples }) => multiples !== null)) {
    notes.warn(
      `no bearing will be judged at ${hz(shaft.lowHz)}: ${Math.floor(turns)} turns a block, ${LEAST_TURNS} are needed; give the envelope more lines or averages`,
    );
  }
}

/** Behind a belt or gear only the pump's own points are on the impeller's shaft. */
function vanesOn(point: Point, machine: Machine): number | null {
  const direct = machine.points.every(({ ratio }) => ratio === 1);
  return direct || point.part === 'pump' || point.part === 'fan' ? machine.vanes : null;
}

function otherRatios(point: Point, machine: Machine): number[] {
  const ratios = new Set([1, ...machine.points.map(({ ratio }) => ratio)]);
  ratios.delete(point.ratio);
  return [...ratios].map((ratio) => ratio / point.ratio);
}

function plannedShaft(machine: Machine, ratio: number): PlannedShaft | null {
  const source = machine.shaft;
  if (source?.kind === 'fixed') {
    const hz = (source.rpm / 60) * ratio;
    const tolerance = source.tolerancePct / 100;
    return { lowHz: hz * (1 - tolerance), highHz: hz * (1 + tolerance), nominalHz: hz };
  }
  if (source?.kind === 'range') {
    const [low, high] = source.rpmRange;
    return { lowHz: (low / 60) * ratio, highHz: (high / 60) * ratio, nominalHz: null };
  }
  return null;
}

function planSpectrum(point: Point, rateHz: number, notes: PlanNotes): SpectrumPlan {
  const asked = point.measure.velocity;
  const carriedHz = rateHz / RATE_OVER_FMAX;
  const fmaxHz = Math.min(asked.fmaxHz, carriedHz);
  if (fmaxHz < asked.fmaxHz) {
    notes.caution(
      `Fmax ${hz(asked.fmaxHz)} needs a rate of ${hz(asked.fmaxHz * RATE_OVER_FMAX)}; ${hz(rateHz)} carries ${hz(carriedHz)}`,
    );
  }
  if (fmaxHz <= OVERALL_HZ.usual) {
    throw new PlanError(
      point.key,
      `a rate of ${hz(rateHz)} carries ${hz(carriedHz)}, too little for a velocity`,
    );
  }
  const factor = chooseFactor(rateHz, fmaxHz);
  const lineHz = asked.fmaxHz / asked.lines;
  const decimatedHz = rateHz / factor;
  const blockSamples = Math.round(decimatedHz / lineHz);
  const decimation = decimationOf(rateHz, factor, fmaxHz);
  const averages = Math.max(LEAST_AVERAGES, asked.averages);
  return {
    factor,
    rateHz: decimatedHz,
    fmaxHz,
    lines: Math.floor(fmaxHz / lineHz),
    lineHz,
    blockSamples,
    averages,
    window: asked.window,
    marginSamples: decimation.marginSamples,
    rawSamples: decimation.inputLength(blockSamples + (averages - 1) * Math.ceil(blockSamples / 2)),
  };
}

/** Without a speed in the settings: synchronous, or two poles on mains, as fast as a pump commonly gets. */
function fastestUnknownHz(machine: Machine, ratio: number, mainsHz: number): number {
  return synchronousHz(mainsHz, machine.motor.poles ?? 2) * ratio;
}

function highestBpfi(bearings: readonly PlannedBearing[]): number {
  return Math.max(0, ...bearings.map((bearing) => bearing.multiples?.bpfi ?? 0));
}

function accelerationBandHz(point: Point, rateHz: number): [number, number] {
  const usable = point.sensor.usableHz;
  const carriedHz = rateHz / RATE_OVER_FMAX;
  return [usable?.[0] ?? OVERALL_HZ.slow, Math.min(usable?.[1] ?? carriedHz, carriedHz)];
}

/** The filter of a spectrum plan; made again where the record is measured, as it does not travel between threads. */
export function decimationOf(rateHz: number, factor: number, fmaxHz: number): DecimationPlan {
  return planDecimation({
    rateHz,
    factor,
    fmaxHz: Math.min(fmaxHz * CLOCK_SLACK, rateHz / factor / 2.1),
    attenuationDb: ATTENUATION_DB,
  });
}

function ratesAt(multiples: BearingMultiples | null, shaftHz: number | null): BearingRates | null {
  if (multiples === null || shaftHz === null) return null;
  const { ftf, bsf, bpfo, bpfi } = multiples;
  return { ftf: ftf * shaftHz, bsf: bsf * shaftHz, bpfo: bpfo * shaftHz, bpfi: bpfi * shaftHz };
}

/** How many blocks' worth of time half-overlapped averages take. */
function overlappedBlocks(blockLength: number, averages: number): number {
  return blockLength * (1 + (averages - 1) / 2);
}
