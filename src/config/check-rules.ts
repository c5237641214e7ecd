/** Alarm rules: one test each, a figure that exists, limits in order, points that exist. */

import { checkIds, checkOneOf } from './check-ids.ts';
import { type Report, suggestion } from './issues.ts';
import { mergeMeasure } from './merge-measure.ts';
import type { LooseStationFile } from './schema.ts';
import { type WatchKind, watchKind, watchPaths } from './watch-paths.ts';
import type { KeyPath } from './yaml-text.ts';

type LooseRule = NonNullable<NonNullable<LooseStationFile['alarms']>[number]>;
type BandsByPoint = ReadonlyMap<string, ReadonlySet<string>>;

const tests = ['above', 'below', 'zones', 'is', 'baseline', 'rise'] as const;

export function checkRules(file: LooseStationFile, report: Report): void {
  const reserved = { sensor: 'the built-in rule for sensor health, which is always in force' };
  checkIds(file.alarms, ['alarms'], 'rule', reserved, report);
  const bands = bandsByPoint(file);
  const everyPointNamed = (file.machines ?? [undefined]).every(
    (machine) => machine?.id !== undefined && machine.points?.every((point) => point?.id !== undefined),
  );
  for (const [index, rule] of (file.alarms ?? []).entries()) {
    if (rule) checkRule(rule, ['alarms', index], bands, everyPointNamed, report);
  }
}

function bandsByPoint(file: LooseStationFile): BandsByPoint {
  const bands = new Map<string, ReadonlySet<string>>();
  for (const machine of file.machines ?? []) {
    for (const point of machine?.points ?? []) {
      if (machine?.id === undefined || point?.id === undefined) continue;
      const merged = mergeMeasure([file.measure, machine.measure, point.measure]);
      bands.set(`${machine.id}/${point.id}`, new Set(merged.bands.flatMap((band) => band?.id ?? [])));
    }
  }
  return bands;
}

function checkRule(
  rule: LooseRule,
  path: KeyPath,
  bands: BandsByPoint,
  everyPointNamed: boolean,
  report: Report,
): void {
  const test = checkOneOf(rule, tests, path, true, report);
  const keys = [...bands.keys()];
  for (const [index, key] of (rule.points ?? []).entries()) {
    // A machine or point whose own id is wrong is reported there, and not once more at each rule.
    if (key === undefined || bands.has(key) || !everyPointNamed) continue;
    report(
      'config.reference',
      [...path, 'points', index],
      `there is no point ${key}${suggestion(key, keys)}`,
    );
  }
  const kind = checkWatch(rule, path, bands, report);
  if (test !== null && kind !== undefined) checkKind(rule, test, kind, path, report);
  if (test === 'zones' && rule.watch !== undefined && rule.watch !== 'velocity.overall') {
    report('config.wrong-value', [...path, 'watch'], `is ${rule.watch}, zones judge velocity.overall`);
  }
  checkLimits(rule, path, report);
  if (rule.level !== undefined && test !== null && test !== 'is') {
    report('config.exclusive-keys', [...path, 'level'], `goes with is, ${test} names its levels itself`);
  }
  checkOneOf(rule, ['deadband_pct', 'deadband'], path, false, report);
  for (const key of ['deadband_pct', 'deadband'] as const) {
    if (rule[key] === undefined || test !== 'is') continue;
    report('config.exclusive-keys', [...path, key], 'does not go with is, which has no limit; take it out');
  }
}

/** The kind of figure that is watched; undefined where there is none. */
function checkWatch(
  rule: LooseRule,
  path: KeyPath,
  bands: BandsByPoint,
  report: Report,
): WatchKind | undefined {
  if (rule.watch === undefined) return undefined;
  const watched = [...bands].filter(([key]) => rule.points === undefined || rule.points.includes(key));
  const all = new Set(watched.flatMap(([, ids]) => [...ids]));
  const kind = watchKind(rule.watch, all);
  if (kind === undefined) {
    const message = `${rule.watch} is no figure of a reading${suggestion(rule.watch, watchPaths(all))}`;
    report('config.reference', [...path, 'watch'], message);
    return undefined;
  }
  for (const key of rule.points ?? []) {
    const ids = key === undefined ? undefined : bands.get(key);
    if (ids === undefined || watchKind(rule.watch, ids) !== undefined) continue;
    report(
      'config.reference',
      [...path, 'watch'],
      `${rule.watch} is no figure of ${key}, which has no such band`,
    );
  }
  return kind;
}

function checkKind(
  rule: LooseRule,
  test: (typeof tests)[number],
  kind: WatchKind,
  path: KeyPath,
  report: Report,
): void {
  if (test === 'is') {
    if (kind.kind === 'number') {
      const message = `${rule.watch} is a number, compare it by above or below`;
      report('config.wrong-value', [...path, 'is'], message);
      return;
    }
    for (const [index, value] of (rule.is ?? []).entries()) {
      if (value === undefined || kind.values.includes(value)) continue;
      const message = `${rule.watch} is never ${value}${suggestion(value, kind.values)}`;
      report('config.wrong-value', [...path, 'is', index], message);
    }
  } else if (kind.kind === 'text' && test !== 'zones') {
    const message = `${rule.watch} is one of ${kind.values.join(', ')}, compare it by is`;
    report('config.wrong-value', [...path, test], message);
  }
}

function checkLimits(rule: LooseRule, path: KeyPath, report: Report): void {
  for (const key of ['above', 'below', 'baseline'] as const) {
    const levels = rule[key];
    if (!levels) continue;
    const falls = key === 'below' || (key === 'baseline' && isFall(levels));
    if (key === 'baseline' && !hasOneSide(levels, [...path, key], report)) continue;
    checkOrder(levels.alert, levels.danger, falls, [...path, key], 'danger', report);
  }
  const rise = rule.rise;
  if (rise) checkOrder(rise.alert_pct, rise.danger_pct, false, [...path, 'rise'], 'danger_pct', report);
}

type Levels = { alert?: number | undefined; danger?: number | undefined };

/** Of a baseline: shares of the learned value instead of multiples. */
function isFall({ alert, danger }: Levels): boolean {
  return (alert ?? danger ?? 1) < 1;
}

/** A rule watches for a rise or for a fall, and the learned value itself is neither. */
function hasOneSide(levels: Levels, path: KeyPath, report: Report): boolean {
  for (const key of ['alert', 'danger'] as const) {
    const times = levels[key];
    if (times === undefined) continue;
    if (times === 1) {
      report(
        'config.impossible',
        [...path, key],
        'is 1, the learned value itself; take more, or less for a fall',
      );
      return false;
    }
    if (times < 1 !== isFall(levels)) {
      const message = `is ${times}, alert is ${levels.alert}: one watches for a rise, the other for a fall`;
      report('config.impossible', [...path, key], message);
      return false;
    }
  }
  return true;
}

function checkOrder(
  alert: number | undefined,
  danger: number | undefined,
  falls: boolean,
  path: KeyPath,
  dangerKey: string,
  report: Report,
): void {
  if (alert === undefined && danger === undefined) {
    const about = [dangerKey, dangerKey.replace('danger', 'alert')].map((key) => [...path, key]);
    report('config.missing-key', path, 'has neither alert nor danger, give one at least', about);
    return;
  }
  if (alert === undefined || danger === undefined) return;
  const inverted = falls ? danger > alert : danger < alert;
  if (!inverted) return;
  const message = `is ${danger}, danger lies ${falls ? 'below' : 'above'} alert (${alert}); are they swapped?`;
  report('config.impossible', [...path, dangerKey], message);
}
