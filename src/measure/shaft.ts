/** Speed of the shaft at a point: from the tachometer, as told from outside, or found in the record. */

import type { DecimatedRecord } from './decimated.ts';
import type { PointPlan } from './plan.ts';
import type { ShaftSpeedSource } from './reading.ts';
import type { SampleRecord } from './record.ts';
import { searchShaft, speedDrift } from './shaft-search.ts';
import { pulsesTooShort, type TachometerSpeed, tachometerSpeed } from './tachometer.ts';

export interface ShaftFigures {
  readonly hz: number | null;
  readonly source: ShaftSpeedSource | null;
  /** 0 to 1; null where nothing was searched. */
  readonly confidence: number | null;
  /** Pulses on the same node; null: none. */
  readonly tachometer: TachometerSpeed | null;
  readonly why: readonly string[];
}

/** Turns that differ by more than this are worth a word; by more than that, no one speed stands for the record. */
const VARIES = 0.01;
const NO_ONE_SPEED = 0.1;

/** Speed by pulses or by word, which need no spectrum; null where it must be found in the record. */
export function givenShaft(plan: PointPlan, record: SampleRecord): ShaftFigures | null {
  const { ratio } = plan.point;
  const kind = plan.machine.shaft?.kind;
  if (record.tachometer !== null && kind === 'tachometer') {
    const { counts, pulsesPerRev } = record.tachometer;
    if (pulsesTooShort(counts)) {
      return unknown(
        'tachometer pulses are shorter than two samples; give fewer a turn, or a higher rate',
        null,
      );
    }
    const speed = tachometerSpeed(counts, pulsesPerRev, record.rate.hz);
    if (speed === null) return unknown('no tachometer pulses', null);
    const percent = (speed.spread * 100).toFixed(1);
    const certain = speed.spread - speed.resolution;
    if (certain > NO_ONE_SPEED) {
      return unknown(`it varies by ${percent} % within the record, or pulses are missing`, speed);
    }
    const why = certain > VARIES ? [`speed varies by ${percent} % within the record`] : [];
    return { hz: speed.hz * ratio, source: 'tachometer', confidence: null, tachometer: speed, why };
  }
  if (kind === 'tachometer' || kind === 'mqtt') {
    if (record.toldShaftHz === null) {
      return unknown(kind === 'mqtt' ? 'nothing usable was told lately' : 'no tachometer pulses', null);
    }
    if (!(record.toldShaftHz > 0)) return unknown(`${record.toldShaftHz} Hz was told`, null);
    const hz = record.toldShaftHz * ratio;
    return {
      hz,
      source: kind === 'mqtt' ? 'mqtt' : 'tachometer',
      confidence: null,
      tachometer: null,
      why: [],
    };
  }
  if (plan.machine.shaft === null) {
    return { hz: null, source: null, confidence: null, tachometer: null, why: [] };
  }
  if (plan.machine.shaft.kind === 'fixed' && plan.machine.shaft.tolerancePct === 0) {
    const hz = (plan.machine.shaft.rpm / 60) * ratio;
    return { hz, source: 'configured', confidence: null, tachometer: null, why: [] };
  }
  return null;
}

function unknown(reason: string, tachometer: TachometerSpeed | null): ShaftFigures {
  return { hz: null, source: null, confidence: null, tachometer, why: [`speed unknown: ${reason}`] };
}

/** Speed found in the record of a running machine. */
export function foundShaft(
  plan: PointPlan,
  decimated: DecimatedRecord,
  acceleration: Float64Array,
  rateHz: number,
): ShaftFigures {
  const found = searchShaft(plan, decimated, acceleration, rateHz);
  if (found.hz === null) {
    return { hz: null, source: null, confidence: null, tachometer: null, why: [found.reason] };
  }
  const drift = speedDrift(plan, decimated);
  if (drift !== null && drift.share > NO_ONE_SPEED / 4) return unknown(drift.text, null);
  const why = drift !== null && drift.share > VARIES ? [drift.text] : [];
  return { hz: found.hz, source: 'spectrum', confidence: found.confidence, tachometer: null, why };
}
