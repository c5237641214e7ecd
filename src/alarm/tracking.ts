/** What a reading says of the point and its machine beside the figures: does it run, since when, does it count. */

import type { Machine, Point } from '../config/station.ts';
import type { Reading } from '../measure/reading.ts';
import type { MachineRow, PointRow } from './state.ts';

/** Readings in a row without a valid figure that make a point unknown. */
export const UNKNOWN_AFTER = 3;
/** Sample time without judgement after which the quiet is told as suppression by design; short stops are no news. */
export const SUPPRESS_AFTER_S = 3600;
/** Speed lost from one reading to the next that means coasting down. Common practice, no source. */
const COASTING = 0.9;
/** Speeds this far outside the configured range are outside it. */
const RANGE_SLACK = 0.05;

/** A reading has figures to judge by. */
function isValid(reading: Reading): boolean {
  return reading.quality !== 'bad' && reading.velocity.overall !== null;
}

/**
 * Follows one point. A reading counts if the machine runs, its start delay is over, it is not coasting down and its
 * speed is within its range.
 */
export function trackPoint(
  from: PointRow,
  machine: Machine,
  point: Point,
  reading: Reading,
  elapsedS: number | null,
): { row: PointRow; counts: boolean } {
  const { running } = reading;
  let startedS = from.startedS;
  if (running === false) startedS = null;
  else if (running === true && from.wasRunning === false) startedS = 0;
  else if (startedS !== null) startedS += elapsedS ?? 0;
  if (startedS !== null && startedS + 1e-6 >= machine.startDelayS) startedS = null;
  const shaftHz = running === true ? reading.shaft.hz : null;
  const coasting = shaftHz !== null && from.shaftHz !== null && shaftHz < COASTING * from.shaftHz;
  const counts = running === true && startedS === null && !coasting && withinRange(machine, point, shaftHz);
  // A reading that tells nothing is a fault, not a design.
  const byDesignS = running === null ? 0 : (elapsedS ?? 0);
  const uncountedS = counts ? 0 : Math.min(from.uncountedS + byDesignS, SUPPRESS_AFTER_S);
  const valid = isValid(reading);
  const row: PointRow = {
    ...from,
    running,
    wasRunning: running ?? from.wasRunning,
    startedS,
    uncountedS,
    shaftHz: shaftHz ?? (running === true ? from.shaftHz : null),
    zone: running === true ? reading.zone : null,
    invalid: valid ? 0 : Math.min(from.invalid + 1, UNKNOWN_AFTER),
  };
  return { row, counts };
}

function withinRange({ shaft }: Machine, { ratio }: Point, shaftHz: number | null): boolean {
  if (shaft?.kind !== 'range' || shaftHz === null) return true;
  const rpm = (60 * shaftHz) / ratio;
  const [low, high] = shaft.rpmRange;
  return rpm >= low * (1 - RANGE_SLACK) && rpm <= high * (1 + RANGE_SLACK);
}

/** Follows the machine: it runs if any of its points says so; hours come from the sample time of one point. */
export function trackMachine(
  from: MachineRow,
  votes: readonly (boolean | null)[],
  pointKey: string,
  running: boolean | null,
  elapsedS: number | null,
  t: string,
): MachineRow {
  const merged = votes.includes(true) ? true : votes.includes(false) ? false : null;
  const day = t.slice(0, 10);
  const started = merged === true && from.wasRunning === false;
  const clock = nextClock(from.clock, votes.length, pointKey);
  return {
    ...from,
    running: merged,
    wasRunning: merged ?? from.wasRunning,
    since: sinceOf(from, merged, t),
    runS: from.runS + (running === true && clock.point === pointKey ? (elapsedS ?? 0) : 0),
    day,
    starts: (day === from.day ? from.starts : 0) + (started ? 1 : 0),
    clock,
  };
}

/** When the machine began to run or to stand; a while of which nothing is known does not begin it anew. */
export function sinceOf(from: MachineRow, running: boolean | null, t: string): string {
  const same = running === from.running || running === null || running === from.wasRunning;
  return same ? (from.since ?? t) : t;
}

/** Another point takes over the counting when the one that did has missed three rounds. */
function nextClock(
  from: MachineRow['clock'],
  points: number,
  pointKey: string,
): { point: string; missed: number } {
  if (from === null || from.point === pointKey) return { point: pointKey, missed: 0 };
  const missed = from.missed + 1;
  return missed > 3 * points ? { point: pointKey, missed: 0 } : { point: from.point, missed };
}
