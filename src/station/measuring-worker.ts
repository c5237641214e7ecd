/** The thread that measures: reads a record out of a ring and answers with a reading. */

import { parentPort, workerData } from 'node:worker_threads';
import { RingReader } from '../link/ring.ts';
import { measureRecord } from '../measure/measure.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import { pulsesTooShort, tachometerSpeed } from '../measure/tachometer.ts';
import type { MeasureJob, MeasureOutcome, MeasuringSetup, RingSpan, ToWorker } from './measure-job.ts';

let setup = workerData as MeasuringSetup;
const port = parentPort;
if (!port) throw new Error('this module runs as a worker only');

const rings = new Map<string, RingReader>();
const plans = new Map<string, PointPlan>();
let points = pointsOf(setup);

function pointsOf({ points: entries }: MeasuringSetup) {
  return new Map(entries.map((entry) => [entry.point.key, entry]));
}

function planFor(pointKey: string, rateHz: number): PointPlan {
  const known = plans.get(pointKey);
  if (known && known.rateHz === rateHz) return known;
  const entry = points.get(pointKey);
  if (!entry) throw new Error(`no point ${pointKey}`);
  const plan = planPoint(entry.point, entry.machine, rateHz, setup.mainsHz);
  plans.set(pointKey, plan);
  return plan;
}

/** The counts of a span, or why they cannot be had. */
function countsOf(span: RingSpan): Int32Array | string {
  const ring = rings.get(span.link);
  if (!ring) return 'no ring';
  const counts = new Int32Array(span.samples);
  const result = ring.read(span.epoch, span.channel, span.first, span.samples, counts);
  return result === 'ok' ? counts : result;
}

function measure(job: MeasureJob): MeasureOutcome {
  const counts = countsOf(job.span);
  if (typeof counts === 'string') return { id: job.id, missed: counts };
  const pulses = job.tachometer && countsOf({ ...job.span, channel: job.tachometer.channel });
  if (typeof pulses === 'string') return { id: job.id, missed: pulses };
  const ring = rings.get(job.span.link);
  const reading = measureRecord(planFor(job.pointKey, job.nominalRateHz), {
    counts,
    firstIndex: job.span.first,
    unit: job.unit,
    unitsPerCount: job.unitsPerCount,
    countRange: job.countRange,
    rate: job.rate,
    tachometer:
      pulses && job.tachometer ? { counts: pulses, pulsesPerRev: job.tachometer.pulsesPerRev } : null,
    toldShaftHz: job.toldShaftHz ?? otherTachometerHz(job),
    toldRunning: job.toldRunning,
    missingSamples: ring ? ring.missingWithin(job.span.first, job.span.samples) : job.span.samples,
    distrust: job.distrust,
  });
  return { id: job.id, reading };
}

function otherTachometerHz(job: MeasureJob): number | null {
  const other = job.otherTachometer;
  if (!other) return null;
  const counts = countsOf(other.span);
  if (typeof counts === 'string') return null;
  if (pulsesTooShort(counts)) return null;
  return tachometerSpeed(counts, other.pulsesPerRev, other.rate.hz)?.hz ?? null;
}

port.on('message', (message: ToWorker) => {
  if (message.kind === 'setup') {
    setup = message.setup;
    points = pointsOf(setup);
    plans.clear();
    return;
  }
  if (message.kind === 'ring') {
    if (message.memory === null) rings.delete(message.link);
    else rings.set(message.link, new RingReader(message.memory));
    return;
  }
  let outcome: MeasureOutcome;
  try {
    outcome = measure(message.job);
  } catch (error) {
    outcome = { id: message.job.id, missed: `failed: ${(error as Error).message}`, failed: true };
  }
  port.postMessage(outcome);
});
