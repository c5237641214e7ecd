import type { AlarmEffect, AlarmInput, StoredRow } from '../../src/alarm/effects.ts';
import {
  EMPTY_STATE,
  type EngineStep,
  replanAlarms,
  restoreAlarms,
  stepAlarms,
} from '../../src/alarm/engine.ts';
import type { AlarmPayload, MachineStatePayload } from '../../src/alarm/payload.ts';
import { type AlarmPlan, planAlarms } from '../../src/alarm/plan.ts';
import type { EngineState } from '../../src/alarm/state.ts';
import type { LinkSettings, Machine, Point, Rule, Station } from '../../src/config/station.ts';
import { severityLimits, severityZone } from '../../src/machine/severity.ts';
import type { Defect, Reading } from '../../src/measure/reading.ts';

export const zoneRule: Rule = {
  id: 'zone',
  watch: 'velocity.overall',
  test: { kind: 'zones' },
  onDelayS: 30,
  offDelayS: 60,
  deadband: { pct: 10 },
  readings: null,
  latched: false,
  points: null,
};

export const bearingRule: Rule = {
  ...zoneRule,
  id: 'bearing',
  watch: 'envelope.defect',
  test: { kind: 'is', values: ['outer', 'inner', 'rolling-element', 'cage', 'cage-rate'], level: 'alert' },
  onDelayS: 0,
  deadband: { pct: 0 },
  readings: [3, 5],
};

export const sensorRule: Rule = {
  ...zoneRule,
  id: 'sensor',
  watch: '',
  test: { kind: 'sensor' },
  deadband: { pct: 0 },
};

/** ISO 10816-7 category I up to 200 kW: 2.5, 4.0, 6.6 mm/s. */
const pumpSeverity = { table: 'iso-10816-7', category: 'I', ratedKw: 45 } as const;

export function makePoint(machineId: string, id: string, link: string, changes: Partial<Point> = {}): Point {
  return {
    id,
    machineId,
    key: `${machineId}/${id}`,
    link,
    channel: id,
    direction: 'horizontal',
    part: 'pump',
    end: 'de',
    at: 'bearing',
    bearings: [],
    thrust: false,
    ratio: 1,
    severity: pumpSeverity,
    sensor: { usableHz: null, rangeG: null, mount: null },
    measure: {} as Point['measure'],
    ...changes,
  };
}

export function makeMachine(id: string, points: readonly Point[], changes: Partial<Machine> = {}): Machine {
  return {
    id,
    name: `Pump ${id}`,
    mounting: 'horizontal',
    shaft: { kind: 'fixed', rpm: 1480, tolerancePct: 3 },
    running: { kind: 'velocity', aboveMmS: 0.5 },
    startDelayS: 20,
    motor: { poles: 4, supply: 'mains' },
    vanes: 6,
    bearings: [],
    points,
    ...changes,
  };
}

export function makeStation(
  machines: readonly Machine[],
  rules: readonly Rule[] = [zoneRule, bearingRule, sensorRule],
): Station {
  const ids = new Set(machines.flatMap((machine) => machine.points.map((point) => point.link)));
  const links = [...ids].map((id) => ({ id })) as unknown as LinkSettings[];
  return { site: { id: 'north', name: 'North', mainsHz: 50 }, links, machines, rules } as unknown as Station;
}

/** One pump with one point, `pump-1/de-h` on `node-1`. */
export function onePoint(rules?: readonly Rule[], changes: Partial<Machine> = {}): Station {
  return makeStation([makeMachine('pump-1', [makePoint('pump-1', 'de-h', 'node-1')], changes)], rules);
}

export interface Shown {
  mmS?: number | null;
  um?: number;
  defect?: Defect | null;
  running?: boolean | null;
  why?: string[];
  shaftHz?: number | null;
  quality?: Reading['quality'];
  g?: number;
  meanHz?: number;
  severity?: Point['severity'];
}

export function makeReading(shown: Shown): Reading {
  const {
    mmS = 1,
    um = 10,
    running = true,
    why = [],
    defect = null,
    g = 0.4,
    severity = pumpSeverity,
  } = shown;
  const measured = mmS !== null;
  const line = { expected_hz: 88, hz: 88, line: 0.01, over_floor_db: 3, modulation: 0.1, harmonics: 1 };
  const limits = severity === null ? null : severityLimits(severity);
  return {
    quality: shown.quality ?? (measured ? 'good' : 'bad'),
    why,
    first_index: 0,
    rate: { hz: 40960, source: 'nominal', ppm: null },
    running: measured ? running : null,
    shaft: { hz: measured ? (shown.shaftHz ?? (running === false ? null : 24.7)) : null, source: 'spectrum' },
    velocity: { unit: 'mm/s', overall: mmS },
    displacement: { unit: 'µm', rms: measured ? um : null, p2p: null },
    orders: { 1: { mm_s: null, deg: null }, 2: { mm_s: null, deg: null }, 3: { mm_s: null, deg: null } },
    tones: { vane_pass: null, twice_mains: null },
    acceleration: {
      unit: 'g',
      band_hz: [2, 16000],
      rms: measured ? g : null,
      peak: null,
      crest: null,
      kurtosis: null,
      mean_hz: shown.meanHz ?? null,
    },
    envelope: measured
      ? {
          unit: 'g²',
          band_hz: [500, 16000],
          mean: 0.03,
          floor: 0.001,
          defect,
          bpfo: line,
          bpfi: line,
          bsf: null,
          ftf: null,
        }
      : null,
    zone: measured && running === true && limits !== null ? severityZone(mmS, um, limits) : null,
  };
}

/** Drives the engine as the station does, with a clock that only labels. */
export class Bench {
  plan: AlarmPlan;
  state: EngineState = EMPTY_STATE;
  readonly effects: AlarmEffect[] = [];
  /** The rows as a store would hold them, through JSON. */
  readonly rows: Record<string, StoredRow> = {};
  seconds = 0;
  #n = 0;

  constructor(readonly station: Station) {
    this.plan = planAlarms(station);
  }

  get t(): string {
    return new Date(Date.UTC(2026, 2, 2) + this.seconds * 1000).toISOString();
  }

  put(input: AlarmInput): readonly AlarmEffect[] {
    return this.#keep(stepAlarms(this.plan, this.state, input, this.#nextId));
  }

  /** Power off and on again: all that is left is what was kept. */
  restart(): readonly AlarmEffect[] {
    return this.#keep(restoreAlarms(this.plan, structuredClone(this.rows), this.t, this.#nextId));
  }

  /** Another configuration while it runs. */
  reload(station: Station): readonly AlarmEffect[] {
    this.plan = planAlarms(station);
    return this.#keep(replanAlarms(this.plan, this.state, this.t, this.#nextId));
  }

  tick(elapsedS: number): readonly AlarmEffect[] {
    this.seconds += elapsedS;
    return this.put({ kind: 'tick', elapsedS, t: this.t });
  }

  /** One interval later: a reading of each key. */
  read(shown: Shown | Record<string, Shown>, elapsedS: number | null = 10): readonly AlarmEffect[] {
    const all = isShown(shown) ? { 'pump-1/de-h': shown } : shown;
    const effects = [...this.tick(elapsedS ?? 10)];
    for (const [pointKey, one] of Object.entries(all)) effects.push(...this.readOne(pointKey, one, elapsedS));
    return effects;
  }

  readOne(pointKey: string, shown: Shown, elapsedS: number | null): readonly AlarmEffect[] {
    const severity = this.plan.points.get(pointKey)?.point.severity ?? null;
    const reading = makeReading({ severity, ...shown });
    return this.put({ kind: 'reading', pointKey, reading, t: this.t, elapsedS });
  }

  lifeOf(key: string): string {
    return this.state.alarms[key]?.life.state ?? 'normal';
  }

  readonly #nextId = () => `k3f9-${++this.#n}`;

  #keep({ state, effects }: EngineStep): readonly AlarmEffect[] {
    this.state = state;
    this.effects.push(...effects);
    for (const effect of effects) {
      if (effect.kind !== 'row') continue;
      if (effect.row === null) delete this.rows[effect.key];
      else this.rows[effect.key] = JSON.parse(JSON.stringify(effect.row)) as StoredRow;
    }
    return effects;
  }
}

function isShown(shown: Shown | Record<string, Shown>): shown is Shown {
  return !Object.keys(shown).some((key) => key.includes('/'));
}

export function alarmsIn(effects: readonly AlarmEffect[], topic?: string): AlarmPayload[] {
  return effects.flatMap((effect) =>
    effect.kind === 'publish' && effect.class === 'alarm' && (topic === undefined || effect.topic === topic)
      ? [effect.payload]
      : [],
  );
}

export function statesIn(effects: readonly AlarmEffect[]): MachineStatePayload[] {
  return effects.flatMap((effect) =>
    effect.kind === 'publish' && effect.class === 'state' ? [effect.payload] : [],
  );
}

export function journalIn(effects: readonly AlarmEffect[]) {
  return effects.flatMap((effect) => (effect.kind === 'journal' ? [effect.entry] : []));
}

/** `state level` of each, short enough to compare whole sequences. */
export const brief = (payloads: readonly AlarmPayload[]) =>
  payloads.map(({ state, level }) => `${state} ${level}`);
