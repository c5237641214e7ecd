/** One alarm rule of the file to the rule that the alarm engine works with. */

import { ruleDefaults } from './default-rules.ts';
import type { StationFile } from './schema.ts';
import type { Rule, RuleTest } from './station.ts';

type RuleInFile = NonNullable<StationFile['alarms']>[number];

export function resolveRule(rule: RuleInFile): Rule {
  const test = resolveTest(rule);
  // An `is` rule that says nothing about time is judged over several readings: one reading proves little.
  const untimed = test.kind === 'is' && rule.on_delay_s === undefined;
  const readings = rule.readings ?? (untimed ? ruleDefaults.ofReadings : null);
  return {
    id: rule.id,
    watch: rule.watch,
    test,
    onDelayS: rule.on_delay_s ?? (readings === null ? ruleDefaults.onDelayS : 0),
    offDelayS: rule.off_delay_s,
    deadband:
      rule.deadband === undefined
        ? { pct: rule.deadband_pct ?? (test.kind === 'is' ? 0 : ruleDefaults.deadbandPct) }
        : { unit: rule.deadband },
    readings,
    latched: rule.latched,
    points: rule.points ?? null,
  };
}

function resolveTest(rule: RuleInFile): RuleTest {
  const levels = (given: { alert?: number | undefined; danger?: number | undefined }) => ({
    alert: given.alert ?? null,
    danger: given.danger ?? null,
  });
  if (rule.above) return { kind: 'above', ...levels(rule.above) };
  if (rule.below) return { kind: 'below', ...levels(rule.below) };
  if (rule.is) return { kind: 'is', values: rule.is, level: rule.level ?? 'alert' };
  if (rule.baseline) return { kind: 'baseline', ...levels(rule.baseline) };
  if (rule.rise) {
    const { alert_pct: alert, danger_pct: danger, over_days: overDays } = rule.rise;
    return { kind: 'rise', alertPct: alert ?? null, dangerPct: danger ?? null, overDays };
  }
  return { kind: 'zones' };
}
