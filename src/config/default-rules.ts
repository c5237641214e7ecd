/** The alarm rules in force where a station file lists none, and the one that always is. */

import { defectNames } from './schema.ts';
import type { Rule } from './station.ts';

/** What a rule that leaves these keys out has. */
export const ruleDefaults = { onDelayS: 30, deadbandPct: 10, ofReadings: [3, 5] } as const;

/** Sensors that are silent, flat, over range or foreign; always in force: a dead sensor is no healthy machine. */
export const sensorRule: Rule = {
  id: 'sensor',
  watch: '',
  test: { kind: 'sensor' },
  onDelayS: 30,
  offDelayS: 60,
  deadband: { pct: 0 },
  readings: null,
  latched: false,
  points: null,
};

export const defaultRules: readonly Rule[] = [
  {
    id: 'zone',
    watch: 'velocity.overall',
    test: { kind: 'zones' },
    onDelayS: 30,
    offDelayS: 60,
    deadband: { pct: 10 },
    readings: null,
    latched: false,
    points: null,
  },
  {
    id: 'bearing',
    watch: 'envelope.defect',
    test: { kind: 'is', values: defectNames, level: 'alert' },
    onDelayS: 0,
    offDelayS: 60,
    deadband: { pct: 0 },
    readings: [3, 5],
    latched: false,
    points: null,
  },
  sensorRule,
];
