/** From the latest readings of a machine to the evidence that findings are made of. */

import type { BearingEvidence, MachineEvidence, PointEvidence } from '../machine/finding-evidence.ts';
import type { Reading } from '../measure/reading.ts';
import { conditionLevel } from './condition.ts';
import type { AlarmPlan, PointPlan } from './plan.ts';
import type { EngineState } from './state.ts';

/** The reading whose line accuses, by defect; `cage-rate` shows at the cage's line. */
const LINE = {
  outer: 'bpfo',
  inner: 'bpfi',
  'rolling-element': 'bsf',
  cage: 'ftf',
  'cage-rate': 'ftf',
} as const;

/**
 * The evidence of one machine.
 *
 * @param readings the latest reading by point key; those that do not run or are bad are left out.
 * @param state of the alarm engine: a standing alarm of a point's velocity makes it notable.
 *
 * Bands `low` and `harmonics` are the usual ones of the station file.
 */
export function machineEvidence(
  plan: AlarmPlan,
  machineId: string,
  readings: ReadonlyMap<string, Reading>,
  state: EngineState,
): MachineEvidence {
  const machine = plan.machines.get(machineId)?.machine;
  if (machine === undefined) throw new RangeError(`no machine ${machineId} in this station`);
  const points = machine.points.flatMap(({ key }) => {
    const reading = readings.get(key);
    if (reading === undefined || reading.running !== true || reading.quality === 'bad') return [];
    return [pointEvidence(plan.points.get(key)!, reading, state)];
  });
  const { supply } = machine.motor;
  return { points, supply, mainsHz: plan.station.site.mainsHz, vanes: machine.vanes };
}

function pointEvidence({ point, rules }: PointPlan, reading: Reading, state: EngineState): PointEvidence {
  const { orders, tones, velocity, zone } = reading;
  const alarmed = rules.some(({ key, rule }) => {
    const row = state.alarms[key];
    return rule.watch.startsWith('velocity.') && row !== undefined && conditionLevel(row.condition) !== null;
  });
  const band = (id: string) => {
    const value = velocity[id];
    return typeof value === 'number' ? value : null;
  };
  return {
    point: point.id,
    direction: point.direction,
    part: point.part,
    end: point.end,
    notable: zone === 'C' || zone === 'D' || alarmed,
    overallMmS: velocity.overall,
    ordersMmS: [orders['1'].mm_s, orders['2'].mm_s, orders['3'].mm_s],
    harmonicsMmS: band('harmonics'),
    lowMmS: band('low'),
    twiceMainsMmS: tones.twice_mains?.mm_s ?? null,
    vanePassMmS: tones.vane_pass?.mm_s ?? null,
    bearing: bearingEvidence(reading),
  };
}

function bearingEvidence({ envelope }: Reading): BearingEvidence | null {
  if (envelope === null || envelope.defect === null) return null;
  const line = envelope[LINE[envelope.defect]];
  if (line === null) return null;
  return {
    defect: envelope.defect,
    bearing: envelope.bearing ?? null,
    expectedHz: line.expected_hz,
    hz: line.hz,
    overFloorDb: line.over_floor_db,
    modulation: line.modulation,
    harmonics: line.harmonics,
  };
}
