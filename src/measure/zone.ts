/** The severity zone of a reading, and what changes in a reading when the machine is known to run by other means. */

import type { Machine, Point } from '../config/station.ts';
import { severityApplies, severityLimits, severityZone, type Zone } from '../machine/severity.ts';
import { rounded } from '../signal/rounded.ts';
import { bordersHz, nominalHz } from './plan.ts';
import type { Reading } from './reading.ts';

/** null: stopped, not measured, or no table applies. `shaftHz`: of this record, or as the settings say. */
export function zoneFor(
  point: Point,
  running: boolean | null,
  shaftHz: number | null,
  velocityMmS: number | null,
  displacementUm: number | null,
): Zone | null {
  const { severity } = point;
  if (severity === null || running !== true || velocityMmS === null || displacementUm === null) return null;
  if (severityApplies(point, shaftHz) !== null) return null;
  // As published: a figure that reads like a boundary lies on it.
  const [velocity, displacement] = [rounded(velocityMmS), rounded(displacementUm)];
  if (velocity === null || displacement === null) return null;
  return severityZone(velocity, displacement, severityLimits(severity));
}

/** The reading of a point that vibrates less than the threshold, of a machine that is known to run all the same. */
export function runningReading(reading: Reading, point: Point, machine: Pick<Machine, 'shaft'>): Reading {
  const { shaft, velocity, displacement } = reading;
  return {
    ...reading,
    running: true,
    zone: zoneFor(
      point,
      true,
      bordersHz(nominalHz(machine, point.ratio), shaft.hz),
      velocity.overall,
      displacement.rms,
    ),
  };
}
