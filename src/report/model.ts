/** What a report says: the readings as `replay` gives them, and the curves that they were made of. */

import { EMPTY_STATE } from '../alarm/engine.ts';
import { machineEvidence } from '../alarm/evidence.ts';
import { planAlarms } from '../alarm/plan.ts';
import { ForebayError } from '../config/errors.ts';
import type { Machine, Point, Station } from '../config/station.ts';
import type { Finding } from '../machine/finding-evidence.ts';
import { findingsFor } from '../machine/findings.ts';
import { decimateRecord } from '../measure/decimated.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import type { RateUsed, Reading } from '../measure/reading.ts';
import { gPerCount } from '../measure/validity.ts';
import type { Recording } from '../snapshot/recording.ts';
import { roundedFigures } from '../uplink/payload.ts';
import { type Cascade, cascadeOf } from './cascade.ts';
import { envelopeMarks, type Mark, machineMarks } from './marks.ts';
import { MAX_SAMPLE_BYTES, type PackedSamples, packSamples } from './samples.ts';
import { type RecordCurves, recordCurves } from './spectra.ts';

interface ReportChannel {
  readonly machine: Machine;
  readonly point: Point;
  /** Which channel of the recording. */
  readonly channel: number;
  readonly unit: 'g' | 'm/s2';
  readonly unitsPerCount: number;
}

export interface ReportReading {
  readonly key: string;
  readonly t: string;
  readonly reading: Reading;
}

/** An alarm change, from the replay or from a journal, by the keys of its payload. */
export type AlarmLine = Readonly<Record<string, unknown>>;

export interface ReportInput {
  readonly station: Station;
  /** false: only the recording's own tags are known, and the station is made up from them. */
  readonly stationGiven: boolean;
  /** Name without folders. */
  readonly fileName: string;
  readonly recording: Recording;
  readonly channels: readonly ReportChannel[];
  readonly nominalRateHz: number;
  readonly rate: RateUsed;
  readonly firstIndex: number;
  /** Wall time of the first sample; null: nobody says. */
  readonly start: string | null;
  readonly readings: readonly ReportReading[];
  readonly alarms: readonly AlarmLine[];
  /** null: none was given. */
  readonly journal: readonly AlarmLine[] | null;
  readonly version: string;
}

export interface PointReport {
  readonly machine: Machine;
  readonly point: Point;
  readonly plan: PointPlan;
  readonly scale: { readonly meanCounts: number; readonly gPerCount: number };
  readonly samples: PackedSamples;
  /** All readings, oldest first, figures rounded as they are published. */
  readonly readings: readonly ReportReading[];
  /** The one whose curves are shown, and the same before rounding. */
  readonly shown: ReportReading;
  readonly measured: Reading;
  /** Where its record lies, seconds from the start. */
  readonly recordS: readonly [number, number];
  readonly curves: RecordCurves;
  readonly marks: {
    readonly velocity: readonly Mark[];
    readonly acceleration: readonly Mark[];
    readonly envelope: readonly Mark[];
  };
  /** Where the speed moved within the recording, or could not be told though the machine ran; else null. */
  readonly cascade: Cascade | null;
}

interface MachineReport {
  readonly machine: Machine;
  readonly findings: readonly Finding[];
}

export interface ReportModel {
  readonly input: ReportInput;
  readonly seconds: number;
  readonly machines: readonly MachineReport[];
  readonly points: readonly PointReport[];
}

/** Some seven minutes at 40 960 Hz: what a page can hold and a person will look at. */
const MAX_FRAMES = 2 ** 24;
/** Speeds of readings that differ by more are a change. */
const SPEED_MOVES = 0.01;

/** @throws ForebayError where the recording is too long for one page. */
export function reportModel(input: ReportInput): ReportModel {
  const { recording, channels, station, rate } = input;
  if (recording.frames > MAX_FRAMES) {
    throw new ForebayError(
      'command.usage',
      `${input.fileName} holds ${recording.frames} samples a channel; a report takes ${MAX_FRAMES}, so cut it`,
    );
  }
  const counts = recording.read(0, recording.frames);
  const budgetBytes = Math.floor(MAX_SAMPLE_BYTES / channels.length);
  const points = channels.map((channel) =>
    pointReport(input, channel, counts[channel.channel]!, budgetBytes),
  );
  const alarms = planAlarms(station);
  const machines = [...new Set(points.map(({ machine }) => machine))].map((machine): MachineReport => {
    const own = points.filter((point) => point.machine === machine);
    const latest = new Map(own.map(({ point, measured }) => [point.key, measured]));
    return {
      machine,
      findings: findingsFor(machineEvidence(alarms, machine.id, latest, EMPTY_STATE)),
    };
  });
  return { input, seconds: recording.frames / rate.hz, machines, points };
}

function pointReport(
  input: ReportInput,
  channel: ReportChannel,
  counts: Int32Array,
  budgetBytes: number,
): PointReport {
  const { machine, point } = channel;
  const { station, rate, firstIndex, nominalRateHz } = input;
  const plan = planPoint(point, machine, nominalRateHz, station.site.mainsHz);
  const readings = input.readings.filter(({ key }) => key === point.key);
  const shown = mostTelling(readings);
  if (shown === null) throw new RangeError(`report: no reading of ${point.key}`);
  const from = shown.reading.first_index - firstIndex;
  const to = Math.min(counts.length, from + plan.recordSamples);
  const scale = gPerCount(channel);
  const acceleration = Float64Array.from(counts, (count) => count * scale);
  const curves = recordCurves(plan, acceleration.subarray(from, to), rate.hz, shown.reading);
  const shaftHz = shown.reading.shaft.hz;
  const rates = {
    shaftHz,
    vanes: machine.vanes,
    mainsHz: station.site.mainsHz,
    supply: machine.motor.supply,
  };
  const topOf = (curve: RecordCurves['velocity']) => (curve ? curve.stepHz * (curve.values.length - 1) : 0);
  const speeds = readings.map(({ reading }) => reading.shaft.hz).filter((hz) => hz !== null);
  const moves = machine.shaft !== null && speedMoves(readings);
  const whole = moves ? decimateRecord(plan, acceleration, rate.hz) : null;
  return {
    machine,
    point,
    plan,
    scale: { meanCounts: counts.reduce((sum, count) => sum + count, 0) / counts.length, gPerCount: scale },
    samples: packSamples(counts, budgetBytes),
    readings: readings.map(roundedReading),
    shown: roundedReading(shown),
    measured: shown.reading,
    recordS: [from / rate.hz, to / rate.hz],
    curves,
    marks: {
      velocity: machineMarks(rates, topOf(curves.velocity)),
      acceleration: machineMarks(rates, topOf(curves.acceleration)),
      envelope: shown.reading.envelope
        ? envelopeMarks(plan.bearings, shown.reading.envelope, shaftHz, topOf(curves.envelope))
        : [],
    },
    cascade: whole && cascadeOf(whole, speeds.length === 0 ? null : Math.max(...speeds)),
  };
}

/** Rounded as `replay` prints it; the index is a name and the rate's digits carry its uncertainty. */
function roundedReading({ key, t, reading }: ReportReading): ReportReading {
  const { first_index, rate } = reading;
  return { key, t, reading: { ...roundedFigures(reading), first_index, rate } };
}

/** The last of the readings that say most: trusted, running, its speed known, a defect, a higher zone. */
function mostTelling(readings: readonly ReportReading[]): ReportReading | null {
  const rank = ({ reading }: ReportReading) =>
    (reading.quality === 'bad' ? 0 : 1000) +
    (reading.running === false ? 0 : 100) +
    (reading.shaft.hz === null ? 0 : 50) +
    (reading.envelope?.defect ? 10 : 0) +
    (reading.zone === null ? 0 : 1 + 'ABCD'.indexOf(reading.zone));
  return readings.reduce<ReportReading | null>(
    (best, one) => (best === null || rank(one) >= rank(best) ? one : best),
    null,
  );
}

function speedMoves(readings: readonly ReportReading[]): boolean {
  const ran = readings.filter(({ reading }) => reading.quality !== 'bad');
  const speeds = ran.map(({ reading }) => reading.shaft.hz).filter((hz) => hz !== null);
  if (speeds.length > 0 && Math.max(...speeds) > (1 + SPEED_MOVES) * Math.min(...speeds)) return true;
  const states = new Set(ran.map(({ reading }) => reading.running));
  return states.has(true) && (states.has(false) || speeds.length < ran.length);
}
