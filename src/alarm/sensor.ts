/**
 * What says that a sensor, a node or a link no longer tells the truth. These alarms judge every reading, whether the
 * machine runs or not, and are never suppressed by design: a faulty sensor must not pass for a healthy machine.
 */

import type { Reading } from '../measure/reading.ts';
import type { Timing } from './condition.ts';

/** Faults of one sensor; the words are those of a reading's `why`. */
const SENSOR_FAULTS = ['flat line', 'over-range'] as const;
export type SensorFault = (typeof SENSOR_FAULTS)[number];

/** The sensor fault that a reading complains of; null: none. */
export function sensorFault(reading: Reading): SensorFault | null {
  return SENSOR_FAULTS.find((fault) => reading.why.some((why) => why.includes(fault))) ?? null;
}

/** Whether samples are missing from a reading. That is the link's fault: it hits all channels of a node alike. */
export function hasGap(reading: Reading): boolean {
  return reading.why.some((why) => /\bgap\b/.test(why));
}

/** A single knock or a lost frame is not a fault: it must show in most of the last readings. */
export const PERSISTENT: readonly [number, number] = [3, 5];

/** Conditions of a link that the station reports. */
export const LINK_CONDITIONS = ['silent', 'refused', 'foreign-node'] as const;
export type LinkCondition = (typeof LINK_CONDITIONS)[number];

/** Found by this room from the readings of a link. */
export const GAPS = 'gaps';

/** Conditions of the gateway itself that the station reports. */
export const GATEWAY_CONDITIONS = ['database', 'disk', 'measuring', 'configuration'] as const;
export type GatewayCondition = (typeof GATEWAY_CONDITIONS)[number];

/** Links are watched with patience of their own; this only keeps a flapping one from announcing itself over and over. */
export const LINK_TIMING: Timing = { onDelayS: 0, offDelayS: 30, readings: null };
/** A node that starts a little after the gateway, or restarts, is no news. */
export const LOST_TIMING: Timing = { ...LINK_TIMING, onDelayS: 5 };
