/**
 * Runs a recording through the measuring, finding and alarm code of the agent, with time taken from its samples. The
 * records are cut as the live agent cuts them, so the same counts give the same readings and alarms.
 */

import type { AlarmEffect } from '../alarm/effects.ts';
import { EMPTY_STATE } from '../alarm/engine.ts';
import { planAlarms } from '../alarm/plan.ts';
import type { Machine, Point, Station } from '../config/station.ts';
import { measureRecord } from '../measure/measure.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import type { RateUsed, Reading } from '../measure/reading.ts';
import type { Recording } from '../snapshot/recording.ts';
import { Judging } from './judging.ts';
import { RecordSchedule, type RecordSpan } from './schedule.ts';

export interface ReplayChannel {
  machine: Machine;
  point: Point;
  /** Which channel of the recording. */
  channel: number;
  unit: 'g' | 'm/s2';
  unitsPerCount: number;
  countRange: readonly [number, number] | null;
  /** Channel of the recording that carries the machine's tachometer. */
  tachometer: { channel: number; pulsesPerRev: number } | null;
  /** Speed that the machine was told to have from outside, as a snapshot remembers it. */
  toldShaftHz: number | null;
}

export interface ReplayOptions {
  channels: readonly ReplayChannel[];
  /** The rate that sizes the records: what the node claims. */
  nominalRateHz: number;
  rate: RateUsed;
  firstIndex: number;
  /** Wall time of the first sample. */
  startMs: number;
}

export type ReplayEvent =
  | { kind: 'reading'; machine: string; point: string; id: string; t: string; reading: Reading }
  | { kind: 'effect'; effect: AlarmEffect };

interface Due {
  entry: ReplayChannel;
  plan: PointPlan;
  span: RecordSpan;
  order: number;
}

/** The alarm engine is told of passing time at least so often. */
const TICK_S = 1;

export function* replay(
  station: Station,
  recording: Recording,
  options: ReplayOptions,
): Generator<ReplayEvent, void, void> {
  let n = 1;
  const nextId = () => `replay-${n++}`;
  const judging = new Judging(planAlarms(station), EMPTY_STATE, nextId);
  const labelAt = (seconds: number) => new Date(options.startMs + seconds * 1000).toISOString();
  const previousEnd = new Map<string, number>();
  let toldS = 0;
  // Points of one node share their spans: each is read once.
  let held: RecordSpan & { counts: Int32Array[] } = { first: -1, samples: 0, counts: [] };

  function* step(input: Parameters<Judging['step']>[0]): Generator<ReplayEvent, void, void> {
    const { effects, keep } = judging.step(input);
    keep();
    for (const effect of effects) yield { kind: 'effect', effect };
  }

  for (const due of dueRecords(station, recording, options)) {
    const { entry, span } = due;
    const end = span.first + span.samples;
    const endS = (end - 1 - options.firstIndex) / options.rate.hz;
    for (; endS - toldS >= TICK_S; toldS += TICK_S) {
      yield* step({ kind: 'tick', elapsedS: TICK_S, t: labelAt(toldS + TICK_S) });
    }
    const { first, samples } = span;
    if (held.first !== first || held.samples !== samples) {
      held = { first, samples, counts: recording.read(first - options.firstIndex, samples) };
    }
    const measured = measure(
      held.counts,
      missingWithin(recording, first - options.firstIndex, samples),
      due,
      options,
    );
    const t = labelAt(endS);
    const { key } = entry.point;
    const reading = judging.settled(key, measured);
    const before = previousEnd.get(key);
    previousEnd.set(key, end);
    yield { kind: 'reading', machine: entry.machine.id, point: entry.point.id, id: nextId(), t, reading };
    const elapsedS = before === undefined ? null : (end - before) / options.rate.hz;
    yield* step({ kind: 'reading', pointKey: key, reading, t, elapsedS });
    const findings = judging.noteReading(key, reading);
    if (findings) yield* step({ kind: 'findings', ...findings, t });
  }
}

/** All records, in the order in which they become complete; points in the order of the station where that is equal. */
function dueRecords(station: Station, recording: Recording, options: ReplayOptions): Due[] {
  const head = options.firstIndex + recording.frames;
  const all = options.channels.flatMap((entry, order) => {
    const plan = planPoint(entry.point, entry.machine, options.nominalRateHz, station.site.mainsHz);
    const schedule = new RecordSchedule(plan.stepSamples, plan.recordSamples, options.firstIndex);
    const spans = schedule.due(head, options.firstIndex);
    // Too short for a single record: what there is, is measured and says so.
    if (spans.length === 0) spans.push({ first: options.firstIndex, samples: recording.frames });
    return spans.map((span): Due => ({ entry, plan, span, order }));
  });
  const endOf = ({ span }: Due) => span.first + span.samples;
  return all.sort((a, b) => endOf(a) - endOf(b) || a.order - b.order);
}

/** Of a snapshot that has gaps: how many of these samples never came. */
function missingWithin({ tags }: Recording, first: number, samples: number): number {
  let missing = 0;
  for (const gap of tags?.gaps ?? []) {
    missing += Math.max(0, Math.min(first + samples, gap.at + gap.samples) - Math.max(first, gap.at));
  }
  return missing;
}

function measure(
  counts: readonly Int32Array[],
  missingSamples: number,
  { entry, plan, span }: Due,
  options: ReplayOptions,
): Reading {
  const pulses = entry.tachometer && counts[entry.tachometer.channel];
  return measureRecord(plan, {
    counts: counts[entry.channel] ?? new Int32Array(0),
    firstIndex: span.first,
    unit: entry.unit,
    unitsPerCount: entry.unitsPerCount,
    countRange: entry.countRange,
    rate: options.rate,
    tachometer:
      pulses && entry.tachometer ? { counts: pulses, pulsesPerRev: entry.tachometer.pulsesPerRev } : null,
    toldShaftHz: entry.toldShaftHz,
    toldRunning: null,
    missingSamples,
    distrust: [],
  });
}
