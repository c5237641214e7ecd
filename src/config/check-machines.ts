/** Machines and points: references, severity, speed, bands. */

import { synchronousHz } from '../machine/electrical.ts';
import { checkBearings } from './check-bearings.ts';
import { checkIds, checkOneOf } from './check-ids.ts';
import { channelNames, type LooseLink } from './check-links.ts';
import { checkMeasure } from './check-measure.ts';
import { type Report, suggestion } from './issues.ts';
import type { LooseStationFile } from './schema.ts';
import type { KeyPath } from './yaml-text.ts';

type LooseMachine = NonNullable<NonNullable<LooseStationFile['machines']>[number]>;
type LoosePoint = NonNullable<NonNullable<LooseMachine['points']>[number]>;
type LooseSeverity = LooseMachine['severity'];

const topicWords = 'a topic of the agent';
const reservedMachines = { agent: topicWords, health: topicWords, ask: topicWords, answer: topicWords };
const reservedPoints = { machine: topicWords, alarm: topicWords, state: topicWords, finding: topicWords };

export function checkMachines(file: LooseStationFile, report: Report): void {
  checkIds(file.machines, ['machines'], 'machine', reservedMachines, report);
  for (const [index, machine] of (file.machines ?? []).entries()) {
    if (!machine) continue;
    const path = ['machines', index];
    checkSeverity(machine.severity, [...path, 'severity'], report);
    checkShaft(file, machine, path, report);
    checkRunning(machine, path, report);
    checkBearings(machine, path, report);
    checkIds(machine.points, [...path, 'points'], 'point', reservedPoints, report);
    for (const [number, point] of (machine.points ?? []).entries()) {
      if (!point) continue;
      const at = [...path, 'points', number];
      checkPoint(file, machine, point, at, report);
      checkMeasure(file, machine, point, [index, number], report);
    }
  }
}

function checkPoint(
  file: LooseStationFile,
  machine: LooseMachine,
  point: LoosePoint,
  path: KeyPath,
  report: Report,
): void {
  checkSeverity(point.severity, [...path, 'severity'], report);
  const unit = checkChannel(file, point.link, point.channel, path, report);
  if (unit === 'logic') {
    const message = 'is a logic channel, a point needs one in g or m/s2';
    report('config.reference', [...path, 'channel'], message);
  }
  const bearings = machine.bearings ?? [];
  const bearingIds = bearings.flatMap((bearing) => bearing?.id ?? []);
  for (const [index, id] of [point.bearing ?? []].flat().entries()) {
    if (id === undefined || bearingIds.includes(id) || bearingIds.length < bearings.length) continue;
    const at = Array.isArray(point.bearing) ? [...path, 'bearing', index] : [...path, 'bearing'];
    report('config.reference', at, `this machine has no bearing ${id}${suggestion(id, bearingIds)}`);
  }
}

/** Reports a link or channel that is not there; returns the unit where the file says it. */
function checkChannel(
  file: LooseStationFile,
  linkId: string | undefined,
  channel: string | undefined,
  path: KeyPath,
  report: Report,
): 'g' | 'm/s2' | 'logic' | undefined {
  if (linkId === undefined) return undefined;
  const links = (file.links ?? []).filter((link): link is LooseLink => link !== undefined);
  const link = links.find((candidate) => candidate.id === linkId);
  if (!link) {
    const ids = links.flatMap((candidate) => candidate.id ?? []);
    // A link whose own id is wrong is reported there, and not once more at each of its points.
    if (ids.length === links.length && links.length > 0) {
      report('config.reference', [...path, 'link'], `there is no link ${linkId}${suggestion(linkId, ids)}`);
    }
    return undefined;
  }
  const known = channelNames(link);
  if (channel === undefined || known === null) return undefined;
  if (!known.includes(channel)) {
    const message = `link ${linkId} has no channel ${channel}${suggestion(channel, known)}`;
    report('config.reference', [...path, 'channel'], message);
  }
  return link.format === 'columns'
    ? (link.channels?.find((candidate) => candidate?.name === channel)?.unit ?? 'g')
    : undefined;
}

function checkSeverity(severity: LooseSeverity, path: KeyPath, report: Report): void {
  if (severity === undefined || severity === 'none') return;
  checkOneOf(severity, ['table', 'limits_mm_s'], path, true, report);
  const wanted = {
    'iso-10816-7': ['category', 'rated_kw'],
    'iso-20816-3': ['group', 'support'],
    'iso-10816-3': ['group', 'support'],
  } as const;
  const needed: readonly string[] = severity.table === undefined ? [] : wanted[severity.table];
  const name = severity.table ?? 'limits_mm_s';
  for (const key of ['category', 'rated_kw', 'group', 'support'] as const) {
    if (severity[key] === undefined && needed.includes(key)) {
      report('config.missing-key', [...path, key], `is missing, ${name} needs ${needed.join(' and ')}`);
    } else if (
      severity[key] !== undefined &&
      !needed.includes(key) &&
      (severity.table || severity.limits_mm_s)
    ) {
      report('config.exclusive-keys', [...path, key], `does not go with ${name}, take it out`);
    }
  }
}

function checkShaft(file: LooseStationFile, machine: LooseMachine, path: KeyPath, report: Report): void {
  const shaft = machine.shaft;
  if (machine.motor?.poles !== undefined && machine.motor.poles % 2 === 1) {
    const message = `is ${machine.motor.poles}, poles come in pairs, expected an even number`;
    report('config.impossible', [...path, 'motor', 'poles'], message);
  } else checkSynchronous(file, machine, path, report);
  if (!shaft) return;
  const at = [...path, 'shaft'];
  const source = checkOneOf(shaft, ['rpm', 'rpm_range', 'tachometer', 'mqtt'], at, true, report);
  if (shaft.tolerance_pct !== undefined && source !== null && source !== 'rpm') {
    report('config.exclusive-keys', [...at, 'tolerance_pct'], `goes with rpm, ${source} has no use for it`);
  }
  const tachometer = shaft.tachometer;
  if (!tachometer) return;
  const unit = checkChannel(file, tachometer.link, tachometer.channel, [...at, 'tachometer'], report);
  if (unit !== undefined && unit !== 'logic') {
    const message = `is a channel in ${unit}, a tachometer needs unit: logic`;
    report('config.reference', [...at, 'tachometer', 'channel'], message);
  }
}

/** On the mains an induction motor turns slower than the field, always. Exactly synchronous is left to `check`. */
function checkSynchronous(
  file: LooseStationFile,
  machine: LooseMachine,
  path: KeyPath,
  report: Report,
): void {
  const { motor, shaft } = machine;
  if (motor?.poles === undefined || (motor.supply ?? 'mains') !== 'mains') return;
  const synchronousRpm = 60 * synchronousHz(file.site?.mains_hz ?? 50, motor.poles);
  const [key, slowest] = shaft?.rpm !== undefined ? ['rpm', shaft.rpm] : ['rpm_range', shaft?.rpm_range?.[0]];
  if (slowest === undefined || slowest <= synchronousRpm) return;
  const message =
    `is ${slowest} r/min, a motor of ${motor.poles} poles on the mains stays below ${synchronousRpm} r/min; ` +
    'check poles, or set motor.supply: inverter, or give the motor’s speed and a ratio at points behind a gear';
  report('config.impossible', [...path, 'shaft', String(key)], message);
}

function checkRunning(machine: LooseMachine, path: KeyPath, report: Report): void {
  const running = machine.running;
  if (!running) return;
  checkOneOf(running, ['above_mm_s', 'tachometer', 'mqtt'], [...path, 'running'], true, report);
  if (running.tachometer && machine.shaft?.tachometer === undefined) {
    const message = 'needs shaft.tachometer, which names the channel';
    report('config.reference', [...path, 'running', 'tachometer'], message, [
      [...path, 'shaft', 'tachometer'],
    ]);
  }
}
