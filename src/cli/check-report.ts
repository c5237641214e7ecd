/** What follows from a station's settings at its points, and where they cannot do what they ask for. */

import type { Bearing, Machine, Point, Rule, Station } from '../config/station.ts';
import { type BearingRates, bearingMultiples } from '../machine/bearing.ts';
import { synchronousHz } from '../machine/electrical.ts';
import { severityApplies, severityLimits } from '../machine/severity.ts';
import { type PointPlan, planPoint } from '../measure/plan.ts';
import { type CheckWarning, nominalRateHz } from './check-load.ts';

interface CheckedLimit {
  readonly rule: string;
  readonly watch: string;
  readonly alert: number | string | null;
  readonly danger: number | string | null;
  /** Whose limits they are. */
  readonly by: string;
}

interface CheckedBearing {
  readonly id: string;
  /** false: rules of thumb. */
  readonly certain: boolean;
  /** Of shaft speed; `bsf` once per spin of the element. */
  readonly multiples: BearingRates;
  /** At the nominal speed; null: not known beforehand. */
  readonly hz: BearingRates | null;
}

export interface CheckedPoint {
  readonly kind: 'point';
  readonly point: string;
  /** null, as all that follows from it: known when the node speaks. */
  readonly rate_hz: number | null;
  readonly decimated_hz: number | null;
  readonly decimation: number | null;
  readonly fmax_hz: number;
  readonly lines: number;
  readonly line_hz: number;
  readonly every_s: number;
  readonly record_s: number | null;
  readonly overall_hz: readonly [number, number] | null;
  readonly envelope: {
    readonly band_hz: readonly [number, number];
    readonly fmax_hz: number;
    readonly lines: number;
    readonly line_hz: number;
  } | null;
  /** At the nominal speed; null: not known beforehand. */
  readonly shaft_hz: number | null;
  readonly vane_pass_hz: number | null;
  readonly bearings: readonly CheckedBearing[];
  readonly limits: readonly CheckedLimit[];
  /** Why there are no zones here; null: there are. */
  readonly no_zones: string | null;
  /** From a start to the first reading that can raise a zone or limit alarm. */
  readonly judged_after_start_s: number | null;
}

export interface PointsReport {
  readonly points: readonly CheckedPoint[];
  readonly plans: ReadonlyMap<string, PointPlan>;
  readonly warnings: readonly CheckWarning[];
}

/** @throws PlanError where no record can meet the settings of a point. */
export function reportPoints(station: Station): PointsReport {
  const warnings: CheckWarning[] = [];
  const plans = new Map<string, PointPlan>();
  const points: CheckedPoint[] = [];
  for (const machine of station.machines) {
    warnings.push(...machineWarnings(machine, station.site.mainsHz));
    for (const point of machine.points) {
      const warn = (text: string) => warnings.push({ kind: 'warning', where: point.key, text });
      const rateHz = nominalRateHz(station, point.link);
      const plan = rateHz === null ? null : planPoint(point, machine, rateHz, station.site.mainsHz);
      if (plan) {
        plans.set(point.key, plan);
        for (const text of [...plan.warnings, ...harmonicWarnings(plan)]) warn(text);
      }
      const checked = checkPoint(station, machine, point, plan);
      points.push(checked);
      if (point.severity !== null && checked.no_zones !== null) warn(`no zones: ${checked.no_zones}`);
      const judged = checked.judged_after_start_s;
      if (machine.usualRunS !== undefined && judged !== null && machine.usualRunS < judged) {
        warn(
          `a usual run of ${machine.usualRunS} s ends before the first alarm can be raised, ${judged} s after the start`,
        );
      }
    }
  }
  warnings.push(...sharedChannels(station), ...idleRules(station, points));
  return { points, plans, warnings };
}

function checkPoint(station: Station, machine: Machine, point: Point, plan: PointPlan | null): CheckedPoint {
  const { velocity, everyS } = point.measure;
  const shaftHz =
    plan?.shaft?.nominalHz ??
    (machine.shaft?.kind === 'fixed' ? (machine.shaft.rpm / 60) * point.ratio : null);
  const envelope = plan?.envelope ?? null;
  const noZones = severityApplies(point, shaftHz);
  const recordS = plan === null ? null : plan.recordSamples / plan.rateHz;
  const rules = station.rules.filter((rule) => rule.points === null || rule.points.includes(point.key));
  const delays = rules.filter((rule) => 'alert' in rule.test || rule.test.kind === 'zones');
  return {
    kind: 'point',
    point: point.key,
    rate_hz: plan?.rateHz ?? null,
    decimated_hz: plan?.spectrum.rateHz ?? null,
    decimation: plan?.spectrum.factor ?? null,
    fmax_hz: plan?.spectrum.fmaxHz ?? velocity.fmaxHz,
    lines: plan?.spectrum.lines ?? velocity.lines,
    line_hz: velocity.fmaxHz / velocity.lines,
    every_s: everyS,
    record_s: recordS,
    overall_hz: plan?.overallHz ?? null,
    envelope: envelope && {
      band_hz: envelope.bandHz,
      fmax_hz: envelope.fmaxHz,
      lines: envelope.lines,
      line_hz: envelope.lineHz,
    },
    shaft_hz: shaftHz,
    vane_pass_hz: shaftHz === null || machine.vanes === null ? null : machine.vanes * shaftHz,
    bearings: point.bearings.flatMap((bearing) => checkBearing(bearing, shaftHz)),
    limits: rules.flatMap((rule) => limitsOf(rule, point, noZones)),
    no_zones: noZones,
    judged_after_start_s:
      recordS === null || delays.length === 0
        ? null
        : machine.startDelayS +
          recordS +
          Math.min(...delays.map((rule) => wholeSteps(rule.onDelayS, everyS))),
  };
}

function checkBearing(bearing: Bearing, shaftHz: number | null): CheckedBearing[] {
  const known = bearingMultiples(bearing);
  if (known === null) return [];
  const { certain, ...multiples } = known;
  const { ftf, bsf, bpfo, bpfi } = multiples;
  const hz =
    shaftHz === null
      ? null
      : { ftf: ftf * shaftHz, bsf: bsf * shaftHz, bpfo: bpfo * shaftHz, bpfi: bpfi * shaftHz };
  return [{ id: bearing.id, certain, multiples, hz }];
}

function limitsOf(rule: Rule, point: Point, noZones: string | null): CheckedLimit[] {
  const { test, id, watch } = rule;
  const base = { rule: id, watch };
  switch (test.kind) {
    case 'zones': {
      if (noZones !== null || point.severity === null) return [];
      const { name, velocityMmS, displacementUm } = severityLimits(point.severity);
      const velocity = { ...base, alert: velocityMmS[1], danger: velocityMmS[2], by: `${name}, mm/s RMS` };
      if (displacementUm === null) return [velocity];
      const [, alert, danger] = displacementUm;
      return [velocity, { rule: id, watch: 'displacement.rms', alert, danger, by: `${name}, µm RMS` }];
    }
    case 'above':
    case 'below':
      return [{ ...base, alert: test.alert, danger: test.danger, by: `${test.kind}, set in the file` }];
    case 'baseline': {
      const times = (factor: number | null) => (factor === null ? null : `${factor} x`);
      return [{ ...base, alert: times(test.alert), danger: times(test.danger), by: 'the learned value' }];
    }
    case 'rise': {
      const rise = (pct: number | null) => (pct === null ? null : `+${pct} %`);
      return [
        {
          ...base,
          alert: rise(test.alertPct),
          danger: rise(test.dangerPct),
          by: `over ${test.overDays} days`,
        },
      ];
    }
    case 'is': {
      const values = test.values.join(', ');
      const [alert, danger] = test.level === 'alert' ? [values, null] : [null, values];
      const by =
        rule.readings === null ? 'each reading' : `${rule.readings[0]} of ${rule.readings[1]} readings`;
      return [{ ...base, alert, danger, by }];
    }
    case 'sensor':
      return [];
  }
}

/** Harmonics of one bearing's parts that fall on each other; the plan itself compares the fundamentals. */
function harmonicWarnings(plan: PointPlan): string[] {
  const { envelope, bearings } = plan;
  if (envelope === null) return [];
  return bearings.flatMap(({ id, multiples, nominalHz }) => {
    // Rules of thumb are too coarse to say what coincides.
    if (nominalHz === null || !multiples?.certain) return [];
    const comb = (name: string, hz: number, factor: number) =>
      [1, 2, 3].map((order) => ({
        part: name,
        order,
        name: `${order * factor}x${name}`,
        hz: order * factor * hz,
      }));
    const lines = [
      ...comb('BPFO', nominalHz.bpfo, 1),
      ...comb('BPFI', nominalHz.bpfi, 1),
      ...comb('BSF', nominalHz.bsf, 2),
    ].filter((line) => line.hz <= envelope.fmaxHz);
    return lines.flatMap((line, index) =>
      lines
        .slice(index + 1)
        .filter((other) => other.part !== line.part && other.order !== line.order)
        .filter((other) => Math.abs(other.hz - line.hz) < envelope.lineHz)
        .map(
          (other) =>
            `envelope lines of ${figure(envelope.lineHz)} Hz cannot tell ${line.name} (${figure(line.hz)} Hz) from ${other.name} (${figure(other.hz)} Hz) of ${id}`,
        ),
    );
  });
}

function machineWarnings(machine: Machine, mainsHz: number): CheckWarning[] {
  const { motor, shaft } = machine;
  const warn = (text: string): CheckWarning[] => [{ kind: 'warning', where: machine.id, text }];
  if (shaft === null)
    return warn('no shaft speed is configured: orders and bearing frequencies will be null');
  if (motor.poles === null || motor.supply !== 'mains' || shaft.kind !== 'fixed') return [];
  const synchronousRpm = 60 * synchronousHz(mainsHz, motor.poles);
  if (shaft.rpm === synchronousRpm) {
    return warn(
      `${shaft.rpm} r/min is the synchronous speed, which an induction motor on the mains never reaches: take the speed on the nameplate`,
    );
  }
  const slipPct = 100 * (1 - shaft.rpm / synchronousRpm);
  // Motors slip by a few percent at full load (common practice, no source).
  return slipPct > 10
    ? warn(
        `${shaft.rpm} r/min is ${slipPct.toFixed(0)} % below the synchronous ${synchronousRpm} r/min: check poles`,
      )
    : [];
}

function sharedChannels(station: Station): CheckWarning[] {
  const first = new Map<string, string>();
  return station.machines
    .flatMap((machine) => machine.points)
    .flatMap((point): CheckWarning[] => {
      const channel = `${point.link}/${point.channel}`;
      const owner = first.get(channel);
      first.set(channel, owner ?? point.key);
      if (owner === undefined) return [];
      return [{ kind: 'warning', where: point.key, text: `measures channel ${channel} as ${owner} does` }];
    });
}

function idleRules(station: Station, points: readonly CheckedPoint[]): CheckWarning[] {
  return station.rules.flatMap((rule): CheckWarning[] => {
    const judges = points.some((point) => point.limits.some((limit) => limit.rule === rule.id));
    const learns = rule.test.kind === 'baseline';
    if (learns ? station.asks.includes('baseline') : rule.test.kind !== 'zones' || judges) return [];
    const text = learns
      ? 'baseline is not among the asks of this station: nothing can be learned for it, and it will never be raised'
      : 'no point that it watches has zones: give the machines a severity, or it will never be raised';
    return [{ kind: 'warning', where: `rule ${rule.id}`, text }];
  });
}

/** A delay ends with a reading, and they come every so often. */
function wholeSteps(delayS: number, everyS: number): number {
  return Math.ceil(delayS / everyS) * everyS;
}

/** Four significant digits for a person. */
export function figure(value: number): string {
  return `${Number(value.toPrecision(4))}`;
}
