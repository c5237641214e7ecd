/** The limits of one rule at one point, and whose they are. */

import type { Level, Point, Rule } from '../config/station.ts';
import { severityApplies, severityLimits } from '../machine/severity.ts';
import type { Reading } from '../measure/reading.ts';
import { type Baseline, baselineFor } from './baseline.ts';
import { asPublished, figureAt } from './figure.ts';

/** What one reading says under one rule, before any delay. */
export interface Verdict {
  readonly value: number | string | null;
  readonly unit: string | null;
  /** By level: whether the reading is over it, and whether it is still within the deadband of it. */
  readonly over: Readonly<Record<Level, boolean>>;
  readonly near: Readonly<Record<Level, boolean>>;
  readonly limit: Readonly<Record<Level, number | null>>;
  /** Whose limits, in words. */
  readonly whose: string;
}

const LEVELS: readonly Level[] = ['alert', 'danger'];

/** Whether a rule can ever judge a point: zones need a table that applies at the place. */
export function ruleApplies(rule: Rule, point: Point): boolean {
  if (rule.points !== null && !rule.points.includes(point.key)) return false;
  return rule.test.kind !== 'zones' || severityApplies(point, null) === null;
}

/**
 * Judges one reading by one rule. null: the figure was not measured (or nothing is learned for this speed), which
 * holds every timer. `rise` and `sensor` rules are not judged by a single reading.
 */
export function judge(rule: Rule, point: Point, reading: Reading, baseline: Baseline | null): Verdict | null {
  const { test } = rule;
  switch (test.kind) {
    case 'zones':
      return judgeZones(rule, point, reading);
    case 'is': {
      const figure = figureAt(reading, rule.watch);
      if (figure.kind !== 'word') return null;
      const over = figure.value !== null && test.values.includes(figure.value);
      const over2 = { alert: over, danger: over && test.level === 'danger' };
      const limit = { alert: null, danger: null };
      return { value: figure.value, unit: null, over: over2, near: over2, limit, whose: 'the rule' };
    }
    case 'above':
    case 'below': {
      const limits = { alert: test.alert, danger: test.danger };
      return judgeLimits(rule, reading, limits, test.kind === 'above' ? 1 : -1, 'the station file');
    }
    case 'baseline': {
      const figure = figureAt(reading, rule.watch);
      const learned = baseline === null ? null : baselineFor(baseline, rule.watch, reading.shaft.hz);
      if (figure.kind !== 'number' || learned === null) return null;
      const limits = { alert: null, danger: null } as Record<Level, number | null>;
      for (const level of LEVELS) {
        const times = test[level];
        if (times === null) continue;
        limits[level] = asPublished(baselineLimit(point, rule.watch, learned.median, times, level));
      }
      const whose = `the learned value ${figure4(learned.median)}`;
      return judgeLimits(rule, reading, limits, watchesFall(test) ? -1 : 1, whose);
    }
    case 'rise':
    case 'sensor':
      return null;
  }
}

/**
 * A multiple or share of the learned value; multiples for velocities at least a quarter of B/C above it (danger: half of B/C; common
 * practice, no source), so that a small figure may double in peace, and at most what the table allows
 * (ISO 10816-3 5.4.1, 5.4.2).
 *
 * Worked: group 2 rigid (B/C 2.8 mm/s), learned 0.3 mm/s, factor 2: 0.6 would do, but 0.3 + 0.7 = 1.0 mm/s it is.
 */
export function baselineLimit(
  point: Point,
  watch: string,
  median: number,
  times: number,
  level: Level,
): number {
  const multiple = times * median;
  if (times < 1) return multiple;
  if (!watch.startsWith('velocity.') || point.severity === null) return multiple;
  const table = severityLimits(point.severity);
  const highest = level === 'alert' ? table.alarmMaxMmS : table.tripMaxMmS;
  const leastRise = (level === 'alert' ? 0.25 : 0.5) * table.velocityMmS[1];
  return Math.min(Math.max(multiple, median + leastRise), highest);
}

/** Whether a rule is broken by small figures; a baseline is where its factors are shares of the learned value. */
export function watchesFall(test: Rule['test']): boolean {
  if (test.kind === 'baseline') return (test.alert ?? test.danger ?? 1) < 1;
  return test.kind === 'below';
}

function judgeLimits(
  rule: Rule,
  reading: Reading,
  limit: Record<Level, number | null>,
  sign: 1 | -1,
  whose: string,
): Verdict | null {
  const figure = figureAt(reading, rule.watch);
  if (figure.kind !== 'number') return null;
  const value = asPublished(figure.value);
  const beyond = (level: Level, slack: number) => {
    const at = limit[level];
    return at !== null && sign * value > (slack === 0 ? sign * at : asPublished(sign * at - slack));
  };
  const levels = (slack: (at: number) => number) => ({
    alert: beyond('alert', slack(limit.alert ?? 0)) || beyond('danger', slack(limit.danger ?? 0)),
    danger: beyond('danger', slack(limit.danger ?? 0)),
  });
  return {
    value,
    unit: figure.unit,
    over: levels(() => 0),
    near: levels((at) => slackOf(rule, at)),
    limit: { alert: limit.alert ?? limit.danger, danger: limit.danger },
    whose,
  };
}

function judgeZones(rule: Rule, point: Point, reading: Reading): Verdict | null {
  if (point.severity === null || reading.zone === null) return null;
  const table = severityLimits(point.severity);
  if (reading.velocity.overall === null) return null;
  const mmS = asPublished(reading.velocity.overall);
  const um = reading.displacement.rms === null ? null : asPublished(reading.displacement.rms);
  const boundary = { alert: 1, danger: 2 } as const;
  const over = { alert: reading.zone === 'C' || reading.zone === 'D', danger: reading.zone === 'D' };
  const near = { alert: over.alert, danger: over.danger };
  let heldByUm = false;
  for (const level of LEVELS) {
    const limitMmS = table.velocityMmS[boundary[level]];
    const limitUm = table.displacementUm?.[boundary[level]] ?? null;
    const slackUm = limitUm !== null && 'pct' in rule.deadband ? slackOf(rule, limitUm) : 0;
    const nearMmS = mmS > asPublished(limitMmS - slackOf(rule, limitMmS));
    const nearUm = limitUm !== null && um !== null && um > asPublished(limitUm - slackUm);
    near[level] ||= nearMmS || nearUm;
    if (level === 'alert') heldByUm = nearUm && !nearMmS;
  }
  // Displacement decides where it alone is over, or holds: then it is the figure to tell.
  const decider = over.danger ? boundary.danger : boundary.alert;
  const byDisplacement =
    table.displacementUm !== null &&
    um !== null &&
    ((um > table.displacementUm[decider] && mmS <= table.velocityMmS[decider]) || (!over.alert && heldByUm));
  const [shown, boundaries, unit] = byDisplacement
    ? [um, table.displacementUm!, 'µm']
    : [mmS, table.velocityMmS, 'mm/s'];
  const limit = { alert: boundaries[boundary.alert], danger: boundaries[boundary.danger] };
  return { value: shown, unit, over, near, limit, whose: table.name };
}

function slackOf(rule: Rule, limit: number): number {
  return 'pct' in rule.deadband ? (Math.abs(limit) * rule.deadband.pct) / 100 : rule.deadband.unit;
}

/** Four significant digits, without trailing noise. */
export function figure4(value: number): string {
  return String(asPublished(value));
}
