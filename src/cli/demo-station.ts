/**
 * The station of the demo, an invention: its file, as a person would write it, and the machines that its sensors
 * sit on. Pump 1 is sound; the outer race of pump 2's motor bearing worsens from nothing to plain.
 */

import type { Transport } from '../config/station.ts';
import { bearingMultiples } from '../machine/bearing.ts';
import { type MachineSettings, SimulatedMachine } from '../simulate/machine.ts';
import type { NodeSettings } from '../simulate/node.ts';
import { Converter, type SampleSource } from '../simulate/sensor.ts';

export const demoSite = 'lock-seven';
export const soundMachine = 'pump-1';
export const worseningMachine = 'pump-2';
/** Seconds between two readings of a point. */
export const demoEveryS = 4;

interface DemoNode {
  readonly link: string;
  readonly settings: NodeSettings;
  source(): SampleSource;
}

const bearings = {
  [soundMachine]: { elements: 9, elementMm: 7.94, pitchMm: 39.04, contactDeg: 0 },
  [worseningMachine]: { elements: 8, elementMm: 9.53, pitchMm: 46.4, contactDeg: 0 },
} as const;
const ratedRpm = { [soundMachine]: 1480, [worseningMachine]: 1470 } as const;
const vanes = 6;
const channelNames = ['h', 'v', 'a'] as const;
/** A ±16 g sensor. */
const rangeG = 16;

function multiplesOf(machine: keyof typeof bearings) {
  const { elements, elementMm, pitchMm, contactDeg } = bearings[machine];
  const multiples = bearingMultiples({
    elements,
    geometry: { elementMm, pitchMm, contactDeg },
    multiples: null,
  });
  if (multiples === null) throw new Error(`the bearing of ${machine} has no geometry`);
  return multiples;
}

function machineSettings(machine: keyof typeof bearings, seconds: number): MachineSettings {
  const common = {
    shaft: { mainsHz: 50, poles: 4, ratedRpm: ratedRpm[machine], driftPct: 0.1 },
    vanes,
    points: ['horizontal', 'vertical', 'axial'],
  } as const;
  if (machine === soundMachine) {
    return {
      ...common,
      seed: 20_260_301,
      sources: {
        unbalanceMmS: 1.1,
        misalignmentMmS: 0.25,
        harmonicsMmS: 0.2,
        vanePassMmS: 0.35,
        electricalMmS: 0.15,
        flowRmsG: 0.02,
      },
      resonance: { hz: 210, damping: 0.04, participation: 0.1 },
    };
  }
  return {
    ...common,
    seed: 20_260_302,
    sources: {
      unbalanceMmS: 1.5,
      misalignmentMmS: 0.3,
      harmonicsMmS: 0.25,
      vanePassMmS: 0.4,
      electricalMmS: 0.2,
      flowRmsG: 0.025,
    },
    resonance: { hz: 180, damping: 0.04, participation: 0.1 },
    defects: [
      {
        multiples: multiplesOf(machine),
        part: 'outer',
        impactG: [
          [0.2 * seconds, 0],
          [0.5 * seconds, 0.8],
          [0.8 * seconds, 4],
        ],
      },
    ],
  };
}

/** The two nodes: their rates and formats differ, as those of a real station do. */
export function demoNodes(seconds: number): readonly DemoNode[] {
  const node = (
    link: string,
    machine: keyof typeof bearings,
    settings: NodeSettings,
    converter: { nominalRateHz: number; clockErrorPpm: number; bits: 16 | 24 },
  ): DemoNode => ({
    link,
    settings,
    source: () =>
      new Converter(
        {
          seed: settings.node,
          ...converter,
          channels: channelNames.map((name) => ({
            name,
            unit: 'g',
            unitsPerCount: rangeG / 2 ** (converter.bits - 1),
            noiseGPerRtHz: 6e-5,
          })),
        },
        (rateHz) => new SimulatedMachine(machineSettings(machine, seconds), rateHz),
      ),
  });
  return [
    node(
      'node-1',
      soundMachine,
      { node: 1, serialNumber: 'LS-0001' },
      { nominalRateHz: 40_960, clockErrorPpm: 40, bits: 16 },
    ),
    node(
      'node-2',
      worseningMachine,
      { node: 2, serialNumber: 'LS-0002' },
      { nominalRateHz: 25_600, clockErrorPpm: -60, bits: 24 },
    ),
  ];
}

function transportText(transport: Transport): string {
  return transport.kind === 'serial'
    ? `serial: {path: ${transport.path}, baud: ${transport.baud}}`
    : `tcp: {host: ${transport.host}, port: ${transport.port}}`;
}

function machineText(machine: keyof typeof bearings, name: string, link: string): string {
  const { elements, elementMm, pitchMm, contactDeg } = bearings[machine];
  const point = (channel: string, direction: string) =>
    `      - {id: motor-de-${channel}, link: ${link}, channel: ${channel}, direction: ${direction}, part: motor, ` +
    'end: de, bearing: motor-de}';
  return `  - id: ${machine}
    name: ${name}
    mounting: horizontal
    severity: {table: iso-10816-7, category: I, rated_kw: 37}
    shaft: {rpm: ${ratedRpm[machine]}, tolerance_pct: 1.3}
    running: {above_mm_s: 0.2}
    start_delay_s: 2
    motor: {poles: 4, supply: mains}
    vanes: ${vanes}
    bearings:
      - {id: motor-de, elements: ${elements}, element_mm: ${elementMm}, pitch_mm: ${pitchMm}, contact_deg: ${contactDeg}}
    points:
${point('h', 'horizontal')}
${point('v', 'vertical')}
${point('a', 'axial')}
`;
}

/** The station file. Quicker than the defaults where a minute must show what otherwise takes ten. */
export function demoStationText(settings: {
  readonly brokerPort: number;
  readonly storageDirectory: string;
  readonly transports: readonly Transport[];
}): string {
  const links = demoNodes(60).map(({ link, settings: node, source }, k) => {
    const transport = settings.transports[k];
    if (transport === undefined) throw new RangeError(`demo: no transport for ${link}`);
    return `  - id: ${link}
    ${transportText(transport)}
    format: frames
    expect: {node: ${node.node}, serial_number: ${node.serialNumber}, sample_rate_hz: ${source().nominalRateHz}, channels: [${channelNames.join(', ')}]}
`;
  });
  return `# The demo's station: invented machines, simulated sensors.
site: {id: ${demoSite}, name: Lock Seven pumping station, mains_hz: 50}
broker: {embedded: {port: ${settings.brokerPort}}, bytes_per_day: 100000000}
storage: {directory: ${JSON.stringify(settings.storageDirectory)}, max_mb: 64}
# Every reading is sent, for the table to move; the defaults send one when a figure has moved, and every 2 h.
publish: {change_pct: 0, min_interval_s: 0, at_least_s: ${demoEveryS}}
measure:
  every_s: ${demoEveryS}
  velocity: {fmax_hz: 1000, lines: 1600, averages: 4, window: hann}
  envelope: {band_hz: [500, 10000]}
links:
${links.join('')}machines:
${machineText(soundMachine, 'Duty pump', 'node-1')}${machineText(worseningMachine, 'Assist pump', 'node-2')}`;
}
