/** A station file with one of everything, for tests that break it at one place. */

import { issueLine, type PlacedIssue } from '../../src/config/issues.ts';
import { parseStation } from '../../src/config/load.ts';
import type { Station } from '../../src/config/station.ts';

export const goodText = `site: {id: weir, name: Weir, mains_hz: 50}
broker:
  url: mqtts://broker.example:8883
  username: weir
  password_file: secrets/password
  ca_file: secrets/ca.pem
measure:
  velocity: {fmax_hz: 800, lines: 1600}
links:
  - id: node-1
    serial: {path: /dev/ttyUSB0, baud: 3000000}
    format: frames
    expect: {node: 7, serial_number: A1, sample_rate_hz: 25600, channels: [h, a, tach]}
    sensors:
      h: {usable_hz: [2, 10000], range_g: 16, mount: stud}
  - id: node-2
    tcp: {host: 127.0.0.1, port: 4002}
    format: columns
    sample_rate_hz: 6400
    channels:
      - {name: x, column: 0, scale: 0.001, range: [-16000, 16000]}
      - {name: pulse, column: 1, unit: logic, scale: 1}
machines:
  - id: pump-1
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1480}
    motor: {poles: 4, supply: mains}
    vanes: 6
    bearings:
      - {id: de, elements: 9, element_mm: 7.938, pitch_mm: 39.04}
      - {id: nde, multiples: {ftf: 0.382, bsf: 1.994, bpfo: 3.053, bpfi: 4.947}}
    points:
      - {id: motor-h, link: node-1, channel: h, direction: horizontal, part: motor, end: de, bearing: [de, nde]}
      - {id: motor-a, link: node-1, channel: a, direction: axial, bearing: de, severity: none}
  - id: pump-2
    shaft: {tachometer: {link: node-2, channel: pulse}}
    running: {tachometer: true}
    measure: {every_s: 5, velocity: {lines: 800}, bands: [{id: vanes, orders: [4.5, 5.5]}]}
    points:
      - {id: pump, link: node-2, channel: x, measure: {velocity: {window: flat-top}, envelope: {band_hz: auto}}}
alarms:
  - {id: zone, watch: velocity.overall, zones: true}
  - {id: bearing, watch: envelope.defect, is: [outer, inner], readings: [2, 3]}
  - {id: high, watch: envelope.bpfo.over_floor_db, above: {alert: 12, danger: 20}, deadband: 2, points: [pump-1/motor-h]}
asks: [readings, acknowledge]
`;

export function errorsOf(text: string): readonly PlacedIssue[] {
  const result = parseStation(text, { file: 'station.yaml', baseDir: '/etc/forebay' });
  return 'errors' in result ? result.errors : [];
}

export function linesOf(text: string): string[] {
  return errorsOf(text).map(issueLine);
}

export function stationOf(text: string): Station {
  const result = parseStation(text, { file: 'station.yaml', baseDir: '/etc/forebay' });
  if ('errors' in result) throw new Error(result.errors.map(issueLine).join('\n'));
  return result.station;
}

/** The text with one passage replaced, which must stand there once. */
export function edited(from: string, to: string, text = goodText): string {
  const parts = text.split(from);
  if (parts.length !== 2) throw new Error(`"${from}" stands ${parts.length - 1} times in the text`);
  return parts.join(to);
}
