/** A checked station file to the station that the agent works with: defaults in, overrides merged, frozen. */

import { createHash } from 'node:crypto';
import { resolve as resolvePath } from 'node:path';
import { defaultRules, sensorRule } from './default-rules.ts';
import { type MeasureInFile, mergeMeasure } from './merge-measure.ts';
import { resolveRule } from './resolve-rule.ts';
import type { StationFile } from './schema.ts';
import type {
  Bearing,
  Broker,
  LinkSettings,
  Machine,
  MeasureSettings,
  Point,
  RunningSource,
  SensorTrust,
  Severity,
  ShaftSource,
  Station,
} from './station.ts';

type MachineInFile = StationFile['machines'][number];
type PointInFile = MachineInFile['points'][number];

const defaultAsks = ['readings', 'journal', 'snapshots', 'fetch', 'acknowledge'] as const;
const unknownSensor: SensorTrust = { usableHz: null, rangeG: null, mount: null };

/** @param baseDir the folder of the file, against which relative paths are read. */
export function resolveStation(file: StationFile, text: string, baseDir: string): Station {
  const links = file.links.map(resolveLink);
  return deepFreeze({
    site: { id: file.site.id, name: file.site.name ?? file.site.id, mainsHz: file.site.mains_hz },
    broker: resolveBroker(file, baseDir),
    storage: { directory: resolvePath(baseDir, file.storage.directory), maxMb: file.storage.max_mb },
    publish: {
      changePct: file.publish.change_pct,
      minIntervalS: file.publish.min_interval_s,
      atLeastS: file.publish.at_least_s,
    },
    links,
    machines: file.machines.map((machine) => resolveMachine(file, machine, links)),
    rules: file.alarms === undefined ? defaultRules : [...file.alarms.map(resolveRule), sensorRule],
    asks: file.asks ?? defaultAsks,
    configHash: createHash('sha256').update(text, 'utf8').digest('hex').slice(0, 12),
  });
}

function resolveBroker(file: StationFile, baseDir: string): Broker {
  const broker = file.broker;
  const limits = { bytesPerDay: broker.bytes_per_day, snapshotBytesPerDay: broker.snapshot_bytes_per_day };
  if (broker.url === undefined) return { kind: 'embedded', port: broker.embedded?.port ?? 1883, ...limits };
  const absolute = (path: string | undefined) => (path === undefined ? null : resolvePath(baseDir, path));
  return {
    kind: 'remote',
    url: broker.url,
    clientId: broker.client_id ?? `${file.site.id}-gateway`,
    protocol: broker.protocol === undefined ? null : broker.protocol === 5 ? 5 : 4,
    username: broker.username ?? null,
    passwordFile: absolute(broker.password_file),
    caFile: absolute(broker.ca_file),
    certFile: absolute(broker.cert_file),
    keyFile: absolute(broker.key_file),
    keepaliveS: broker.keepalive_s,
    ...limits,
  };
}

function resolveLink(link: StationFile['links'][number]): LinkSettings {
  const sensors = Object.entries(link.sensors).map(([name, sensor]): [string, SensorTrust] => [
    name,
    { usableHz: sensor.usable_hz ?? null, rangeG: sensor.range_g ?? null, mount: sensor.mount ?? null },
  ]);
  const expect = link.expect;
  return {
    id: link.id,
    transport: link.serial ? { kind: 'serial', ...link.serial } : { kind: 'tcp', ...link.tcp! },
    format:
      link.format === 'frames'
        ? {
            kind: 'frames',
            expect: {
              node: expect?.node ?? null,
              serialNumber: expect?.serial_number ?? null,
              sampleRateHz: expect?.sample_rate_hz ?? null,
              channels: expect?.channels ?? null,
            },
          }
        : {
            kind: 'columns',
            sampleRateHz: link.sample_rate_hz!,
            channels: link.channels!.map((channel) => ({ ...channel, range: channel.range ?? null })),
          },
    sensors: Object.fromEntries(sensors),
  };
}

function resolveMachine(file: StationFile, machine: MachineInFile, links: readonly LinkSettings[]): Machine {
  const bearings = machine.bearings.map(resolveBearing);
  return {
    id: machine.id,
    name: machine.name ?? machine.id,
    mounting: machine.mounting,
    shaft: resolveShaft(machine.shaft),
    running: resolveRunning(machine.running),
    startDelayS: machine.start_delay_s,
    ...(machine.usual_run_s === undefined ? {} : { usualRunS: machine.usual_run_s }),
    motor: { poles: machine.motor?.poles ?? null, supply: machine.motor?.supply ?? null },
    vanes: machine.vanes ?? null,
    bearings,
    points: machine.points.map((point) => resolvePoint(file, machine, point, bearings, links)),
  };
}

function resolvePoint(
  file: StationFile,
  machine: MachineInFile,
  point: PointInFile,
  bearings: readonly Bearing[],
  links: readonly LinkSettings[],
): Point {
  const heard = [point.bearing ?? []].flat();
  const link = links.find((candidate) => candidate.id === point.link)!;
  return {
    id: point.id,
    machineId: machine.id,
    key: `${machine.id}/${point.id}`,
    link: point.link,
    channel: point.channel,
    direction: point.direction,
    part: point.part,
    end: point.end ?? null,
    at: point.at,
    bearings: heard.map((id) => bearings.find((bearing) => bearing.id === id)!),
    thrust: point.thrust,
    ratio: point.ratio,
    severity: resolveSeverity(point.severity ?? machine.severity),
    sensor: Object.hasOwn(link.sensors, point.channel) ? link.sensors[point.channel]! : unknownSensor,
    measure: resolveMeasure(mergeMeasure([file.measure, machine.measure, point.measure])),
  };
}

function resolveMeasure(measure: MeasureInFile): MeasureSettings {
  const { velocity, envelope } = measure;
  return {
    everyS: measure.every_s,
    velocity: {
      fmaxHz: velocity.fmax_hz,
      lines: velocity.lines,
      averages: velocity.averages,
      window: velocity.window,
    },
    bands: measure.bands.map((band) => ({
      id: band.id,
      range: band.hz ? { hz: band.hz } : { orders: band.orders! },
    })),
    envelope: {
      bandHz: envelope.band_hz,
      fmaxHz: envelope.fmax_hz,
      lines: envelope.lines,
      averages: envelope.averages,
    },
  };
}

function resolveBearing(bearing: MachineInFile['bearings'][number]): Bearing {
  const { element_mm: elementMm, pitch_mm: pitchMm, contact_deg: contactDeg = 0 } = bearing;
  return {
    id: bearing.id,
    elements: bearing.elements ?? null,
    geometry: elementMm === undefined || pitchMm === undefined ? null : { elementMm, pitchMm, contactDeg },
    multiples: bearing.multiples ?? null,
  };
}

function resolveSeverity(severity: MachineInFile['severity']): Severity | null {
  if (severity === 'none') return null;
  if (severity.limits_mm_s) return { table: 'limits', limitsMmS: severity.limits_mm_s };
  return severity.table === 'iso-10816-7'
    ? { table: severity.table, category: severity.category!, ratedKw: severity.rated_kw! }
    : { table: severity.table!, group: severity.group!, support: severity.support! };
}

function resolveShaft(shaft: MachineInFile['shaft']): ShaftSource | null {
  if (shaft?.rpm !== undefined) {
    return { kind: 'fixed', rpm: shaft.rpm, tolerancePct: shaft.tolerance_pct ?? 3 };
  }
  if (shaft?.rpm_range) return { kind: 'range', rpmRange: shaft.rpm_range };
  if (shaft?.tachometer) {
    const { link, channel, pulses_per_rev: pulsesPerRev } = shaft.tachometer;
    return { kind: 'tachometer', link, channel, pulsesPerRev };
  }
  return shaft?.mqtt === undefined ? null : { kind: 'mqtt', topic: shaft.mqtt };
}

function resolveRunning(running: MachineInFile['running']): RunningSource {
  if (running.above_mm_s !== undefined) return { kind: 'velocity', aboveMmS: running.above_mm_s };
  if (running.mqtt !== undefined) return { kind: 'mqtt', topic: running.mqtt };
  return { kind: 'tachometer' };
}

function deepFreeze<T>(value: T): T {
  if (typeof value !== 'object' || value === null || Object.isFrozen(value)) return value;
  for (const inner of Object.values(value)) deepFreeze(inner);
  return Object.freeze(value);
}
