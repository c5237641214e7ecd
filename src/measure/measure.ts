/** From a record of samples to a reading. */

import { meanFrequency, statistics } from '../signal/statistics.ts';
import { biasDrift, DRIFT_SPOILS_BELOW_HZ } from './bias-drift.ts';
import { type DecimatedRecord, decimateRecord } from './decimated.ts';
import { measureEnvelope } from './envelope.ts';
import { isSilent } from './mount.ts';
import { NO_ORDERS, orderFigures } from './orders.ts';
import { bordersHz, expectedShaftHz, overallBandHz, type PointPlan } from './plan.ts';
import { range } from './plan-notes.ts';
import type { Reading } from './reading.ts';
import type { SampleRecord } from './record.ts';
import { foundShaft, givenShaft, type ShaftFigures } from './shaft.ts';
import { pulsesTooShort, tachometerSpeed } from './tachometer.ts';
import { NO_TONES, toneFigures } from './tones.ts';
import { gPerCount, judgeSamples } from './validity.ts';
import { displacementPeakToPeak, displacementRms, type Figure, velocityRms } from './velocity.ts';
import { zoneFor } from './zone.ts';

/** A rate less sure than this moves lines by more than the slip of a bearing lets pass. */
const RATE_UNCERTAIN_PPM = 5000;

/**
 * Measures one record. Pure: the same record and plan give the same reading.
 *
 * Sizes follow the plan, frequencies the record's own measured rate. What cannot be measured is null with the reason
 * in `why`: every figure, and quality `bad`, where the samples cannot be trusted (gap, over-range, flat line, distrust);
 * single figures, and quality `uncertain`, where something else is missing.
 */
export function measureRecord(plan: PointPlan, record: SampleRecord): Reading {
  const { invalid, overRange } = judgeSamples(record, plan.point.sensor.rangeG);
  if (invalid.length > 0) return badReading(plan, record, invalid);

  const rateHz = record.rate.hz;
  const acceleration = accelerationG(record);
  const decimated = decimateRecord(plan, acceleration, rateHz);
  if (decimated === null) {
    return badReading(plan, record, [`record too short: ${acceleration.length} samples give no spectrum`]);
  }
  const why: string[] = [...plan.caveats];
  if (overRange !== null) why.push(overRange);
  if (record.rate.ppm !== null && record.rate.ppm > RATE_UNCERTAIN_PPM) {
    why.push(`rate uncertain: ${rateHz.toFixed(1)} Hz within ${(record.rate.ppm / 10_000).toFixed(1)} %`);
  }
  if (decimated.short !== null) why.push(decimated.short);
  const given = givenShaft(plan, record);
  const { rms, peak, crest, kurtosis } = statistics(acceleration);
  const clipped = overRange !== null;
  const drift = biasDrift(
    decimated,
    overallBandHz(bordersOf(plan, given?.hz ?? null), decimated.fmaxHz)[0],
    rms,
  );
  if (drift !== null) {
    why.push(
      `bias drift: the mean moves by ${drift.toPrecision(2)} g, nothing from below ${DRIFT_SPOILS_BELOW_HZ} Hz is told`,
    );
  }
  const leastHz = drift === null ? 0 : DRIFT_SPOILS_BELOW_HZ;
  const take = (figure: Figure): number | null => {
    if (figure.why !== null) why.push(figure.why);
    return figure.value;
  };
  /** What is simply not to be had is told, but makes no reading uncertain. */
  const ruledOut: string[] = [];
  const takeOrRuleOut = (figure: Figure): number | null => {
    if (!figure.settled) return take(figure);
    ruledOut.push(figure.why);
    return null;
  };
  const bandVelocity = (bandHz: readonly [number, number], name: string): number | null =>
    bandHz[0] < leastHz ? null : takeOrRuleOut(velocityRms(decimated, bandHz, name, 'shared'));

  const running = isRunning(plan, record, given, decimated, leastHz);
  if (running === null && plan.machine.running.kind === 'mqtt') {
    why.push('running unknown: nothing usable was told lately');
  }
  const shaft = given ?? foundShaft(plan, decimated, acceleration, rateHz);
  // A machine at rest has no speed to be missed. It is looked for all the same: a smooth machine may vibrate less than
  // the threshold and still have a bearing that tells something.
  if (running !== false) why.push(...shaft.why);

  const bandHz = overallBandHz(bordersOf(plan, shaft.hz), decimated.fmaxHz);
  const overall =
    bandHz[0] < leastHz ? null : take(velocityRms(decimated, bandHz, 'overall velocity', 'whole'));
  const displacement = overall === null ? null : displacementRms(decimated, bandHz).value;
  const bands: Record<string, number | null> = {};
  for (const { id, range } of plan.point.measure.bands) {
    const unitHz = 'hz' in range ? 1 : shaft.hz;
    const edges = 'hz' in range ? range.hz : range.orders;
    bands[id] = unitHz === null ? null : bandVelocity([edges[0] * unitHz, edges[1] * unitHz], `band ${id}`);
  }
  const p2p = overall === null ? null : takeOrRuleOut(displacementPeakToPeak(decimated, bandHz));
  const { hz: shaftHz } = shaft;
  const otherHz = shaftHz === null ? [] : plan.otherRatios.map((ratio) => shaftHz * ratio);
  const envelope = measureEnvelope(plan, acceleration, rateHz, shaft.hz, otherHz);
  // Without a speed it says so too: once is enough, and of a machine at rest it is no news.
  const known = running === false || shaft.why.length > 0;
  const envelopeWhy = envelope.why.filter((text) => !(known && text.startsWith('speed unknown')));
  const silent =
    running !== false && envelope.reading !== null && isSilent(envelope.reading, gPerCount(record), rateHz);
  if (silent) {
    const band = range(envelope.reading.band_hz);
    why.push(`no envelope: ${band} holds nothing but rounding of the counts; is the sensor loose?`);
  }
  const uncertain = why.length > 0 || (envelope.uncertain && envelopeWhy.length > 0);
  why.push(...ruledOut);
  if (!silent) why.push(...envelopeWhy);
  const phase = shaft.source === 'tachometer' && hasPhase(plan, record) ? shaft.tachometer : null;
  return {
    quality: uncertain ? 'uncertain' : 'good',
    why,
    first_index: record.firstIndex,
    rate: record.rate,
    running,
    shaft: {
      hz: shaft.hz,
      source: shaft.source,
      ...(shaft.confidence === null ? {} : { confidence: shaft.confidence }),
    },
    velocity: { unit: 'mm/s', overall, ...bands },
    displacement: {
      unit: 'µm',
      rms: displacement,
      p2p,
    },
    orders: shaft.hz === null ? NO_ORDERS : orderFigures(decimated, shaft.hz, phase, leastHz),
    tones: shaft.hz === null ? NO_TONES : toneFigures(plan, decimated, shaft.hz),
    acceleration: {
      unit: 'g',
      band_hz: [...plan.accelerationHz],
      rms,
      peak: clipped ? null : peak,
      crest: clipped ? null : crest,
      kurtosis: clipped ? null : kurtosis,
      mean_hz: meanFrequency(acceleration, rateHz),
    },
    envelope: silent ? null : envelope.reading,
    zone: zoneFor(
      plan.point,
      running,
      bordersHz(plan.shaft?.nominalHz ?? null, shaft.hz),
      overall,
      displacement,
    ),
  };
}

/** Acceleration in g, its mean removed. */
function accelerationG(record: SampleRecord): Float64Array {
  const { counts } = record;
  let sum = 0;
  for (let i = 0; i < counts.length; i++) sum += counts[i]!;
  const mean = sum / counts.length;
  const scale = gPerCount(record);
  const acceleration = new Float64Array(counts.length);
  for (let i = 0; i < counts.length; i++) acceleration[i] = (counts[i]! - mean) * scale;
  return acceleration;
}

function bordersOf(plan: PointPlan, shaftHz: number | null): number | null {
  return bordersHz(plan.shaft?.nominalHz ?? null, shaftHz) ?? expectedShaftHz(plan);
}

/** @param leastHz velocity from below this cannot be told. */
function isRunning(
  plan: PointPlan,
  record: SampleRecord,
  given: ShaftFigures | null,
  decimated: DecimatedRecord,
  leastHz: number,
): boolean | null {
  const rule = plan.machine.running;
  switch (rule.kind) {
    case 'velocity': {
      const bandHz = overallBandHz(bordersOf(plan, given?.hz ?? null), decimated.fmaxHz);
      if (bandHz[0] < leastHz) return null;
      const overall = velocityRms(decimated, bandHz, 'overall velocity', 'whole').value;
      return overall === null ? null : overall > rule.aboveMmS;
    }
    case 'tachometer':
      if (record.toldRunning !== null) return record.toldRunning;
      if (record.tachometer !== null) {
        const { counts, pulsesPerRev } = record.tachometer;
        return pulsesTooShort(counts) || tachometerSpeed(counts, pulsesPerRev, record.rate.hz) !== null;
      }
      return record.toldShaftHz === null ? null : record.toldShaftHz > 0;
    case 'mqtt':
      return record.toldRunning;
  }
}

/** Phase needs one pulse a turn, and of the very shaft that the point is on. */
function hasPhase(plan: PointPlan, record: SampleRecord): boolean {
  return record.tachometer?.pulsesPerRev === 1 && plan.point.ratio === 1;
}

function badReading(plan: PointPlan, record: SampleRecord, why: string[]): Reading {
  const bands = Object.fromEntries(plan.point.measure.bands.map(({ id }) => [id, null]));
  return {
    quality: 'bad',
    why,
    first_index: record.firstIndex,
    rate: record.rate,
    running: plan.machine.running.kind === 'mqtt' ? record.toldRunning : null,
    shaft: { hz: null, source: null },
    velocity: { unit: 'mm/s', overall: null, ...bands },
    displacement: { unit: 'µm', rms: null, p2p: null },
    orders: NO_ORDERS,
    tones: NO_TONES,
    acceleration: {
      unit: 'g',
      band_hz: [...plan.accelerationHz],
      rms: null,
      peak: null,
      crest: null,
      kurtosis: null,
      mean_hz: null,
    },
    envelope: null,
    zone: null,
  };
}
