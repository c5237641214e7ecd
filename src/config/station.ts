/**
 * The resolved station: what the YAML file means once defaults are filled in, overrides are merged into each
 * point and every reference is known to exist. The rest of the agent sees this and never the file.
 * Everything is deeply frozen.
 */

import type { WindowName } from '../signal/window.ts';

export type Level = 'alert' | 'danger';

export interface Station {
  readonly site: { readonly id: string; readonly name: string; readonly mainsHz: 50 | 60 };
  readonly broker: Broker;
  readonly storage: { readonly directory: string; readonly maxMb: number };
  readonly publish: { readonly changePct: number; readonly minIntervalS: number; readonly atLeastS: number };
  readonly links: readonly LinkSettings[];
  readonly machines: readonly Machine[];
  /** The alarm rules in force: those of the file, or the default set. */
  readonly rules: readonly Rule[];
  readonly asks: readonly string[];
  /** First 12 hex digits of the SHA-256 of the file's text: `config` in the `agent` topic. */
  readonly configHash: string;
}

export type Broker =
  | {
      readonly kind: 'embedded';
      readonly port: number;
      readonly bytesPerDay: number;
      readonly snapshotBytesPerDay: number;
    }
  | {
      readonly kind: 'remote';
      readonly url: string;
      readonly clientId: string;
      /** null: 5 is tried first, then 3.1.1. */
      readonly protocol: 4 | 5 | null;
      readonly username: string | null;
      /** Absolute paths: relative ones in the file are resolved against the file's folder. */
      readonly passwordFile: string | null;
      readonly caFile: string | null;
      readonly certFile: string | null;
      readonly keyFile: string | null;
      readonly keepaliveS: number;
      readonly bytesPerDay: number;
      readonly snapshotBytesPerDay: number;
    };

export type Transport =
  | { readonly kind: 'serial'; readonly path: string; readonly baud: number }
  | { readonly kind: 'tcp'; readonly host: string; readonly port: number };

export interface ColumnChannel {
  readonly name: string;
  readonly column: number;
  readonly unit: 'g' | 'm/s2' | 'logic';
  /** Physical units per unit of the printed number. */
  readonly scale: number;
  /** counts = round(value × 10^decimals). */
  readonly decimals: number;
  /** Where the converter clips, in the printed number; null: unknown. */
  readonly range: readonly [number, number] | null;
}

export interface Expectation {
  readonly node: number | null;
  readonly serialNumber: string | null;
  readonly sampleRateHz: number | null;
  readonly channels: readonly string[] | null;
}

export interface SensorTrust {
  readonly usableHz: readonly [number, number] | null;
  readonly rangeG: number | null;
  readonly mount: 'stud' | 'adhesive' | 'magnet' | 'probe' | null;
}

export interface LinkSettings {
  readonly id: string;
  readonly transport: Transport;
  readonly format:
    | { readonly kind: 'frames'; readonly expect: Expectation }
    | {
        readonly kind: 'columns';
        readonly sampleRateHz: number;
        readonly channels: readonly ColumnChannel[];
      };
  /** By channel name. */
  readonly sensors: Readonly<Record<string, SensorTrust>>;
}

export type Severity =
  | { readonly table: 'iso-10816-7'; readonly category: 'I' | 'II'; readonly ratedKw: number }
  | {
      readonly table: 'iso-20816-3' | 'iso-10816-3';
      readonly group: 1 | 2;
      readonly support: 'rigid' | 'flexible';
    }
  | { readonly table: 'limits'; readonly limitsMmS: readonly [number, number, number] };

export type ShaftSource =
  | { readonly kind: 'fixed'; readonly rpm: number; readonly tolerancePct: number }
  | { readonly kind: 'range'; readonly rpmRange: readonly [number, number] }
  | {
      readonly kind: 'tachometer';
      readonly link: string;
      readonly channel: string;
      readonly pulsesPerRev: number;
    }
  | { readonly kind: 'mqtt'; readonly topic: string };

export type RunningSource =
  | { readonly kind: 'velocity'; readonly aboveMmS: number }
  | { readonly kind: 'tachometer' }
  | { readonly kind: 'mqtt'; readonly topic: string };

export interface Bearing {
  readonly id: string;
  readonly elements: number | null;
  readonly geometry: {
    readonly elementMm: number;
    readonly pitchMm: number;
    readonly contactDeg: number;
  } | null;
  /** Per shaft revolution; `bsf` is once per spin of the element. */
  readonly multiples: {
    readonly ftf: number;
    readonly bsf: number;
    readonly bpfo: number;
    readonly bpfi: number;
  } | null;
}

interface BandSettings {
  readonly id: string;
  readonly range: { readonly hz: readonly [number, number] } | { readonly orders: readonly [number, number] };
}

export interface MeasureSettings {
  readonly everyS: number;
  readonly velocity: {
    readonly fmaxHz: number;
    readonly lines: number;
    readonly averages: number;
    readonly window: WindowName;
  };
  readonly bands: readonly BandSettings[];
  readonly envelope: {
    readonly bandHz: readonly [number, number] | 'auto';
    readonly fmaxHz: number | 'auto';
    readonly lines: number;
    readonly averages: number;
  };
}

export interface Point {
  readonly id: string;
  readonly machineId: string;
  /** `<machine>/<point>`. */
  readonly key: string;
  readonly link: string;
  readonly channel: string;
  readonly direction: 'horizontal' | 'vertical' | 'axial' | 'inline' | 'cross';
  readonly part: 'motor' | 'pump' | 'gear' | 'fan';
  readonly end: 'de' | 'nde' | null;
  readonly at: 'bearing' | 'foot' | 'frame' | 'pipe';
  readonly bearings: readonly Bearing[];
  readonly thrust: boolean;
  /** Shaft speed at this point over that of the machine. */
  readonly ratio: number;
  /** null: no zones are wanted or none apply. */
  readonly severity: Severity | null;
  readonly sensor: SensorTrust;
  readonly measure: MeasureSettings;
}

export interface Machine {
  readonly id: string;
  readonly name: string;
  readonly mounting: 'horizontal' | 'vertical' | 'submersible';
  readonly shaft: ShaftSource | null;
  readonly running: RunningSource;
  readonly startDelayS: number;
  /** How long it usually runs at a time; only for advice on the settings. */
  readonly usualRunS?: number;
  readonly motor: { readonly poles: number | null; readonly supply: 'mains' | 'inverter' | null };
  readonly vanes: number | null;
  readonly bearings: readonly Bearing[];
  readonly points: readonly Point[];
}

export type RuleTest =
  | { readonly kind: 'above' | 'below'; readonly alert: number | null; readonly danger: number | null }
  | { readonly kind: 'zones' }
  | { readonly kind: 'is'; readonly values: readonly string[]; readonly level: Level }
  | { readonly kind: 'baseline'; readonly alert: number | null; readonly danger: number | null }
  | {
      readonly kind: 'rise';
      readonly alertPct: number | null;
      readonly dangerPct: number | null;
      readonly overDays: number;
    }
  /** The built-in sensor rule: silent, flat, over-range, foreign node. */
  | { readonly kind: 'sensor' };

export interface Rule {
  readonly id: string;
  /** A path into a reading, as `velocity.overall`; empty for the sensor rule. */
  readonly watch: string;
  readonly test: RuleTest;
  readonly onDelayS: number;
  readonly offDelayS: number;
  /** In percent of the limit, or in the figure's own unit. */
  readonly deadband: { readonly pct: number } | { readonly unit: number };
  /** [k, n]: the condition must hold in k of the last n readings; null: in each reading of the on-delay. */
  readonly readings: readonly [number, number] | null;
  readonly latched: boolean;
  /** `machine/point` keys; null: all. */
  readonly points: readonly string[] | null;
}
