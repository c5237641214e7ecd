import { mkdtempSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { ForebayError } from '../../src/config/errors.ts';
import { ConfigError, loadStation } from '../../src/config/load.ts';
import { edited, goodText, stationOf } from './station-text.ts';

const least = `site: {id: weir}
links: [{id: n, serial: {path: /dev/ttyUSB0}}]
machines: [{id: p, points: [{id: a, link: n, channel: h}]}]
`;

describe('a station file with the least in it', () => {
  const station = stationOf(least);
  const point = station.machines[0]!.points[0]!;

  it('has a broker inside the agent, and the published limits', () => {
    expect(station.broker).toEqual({
      kind: 'embedded',
      port: 1883,
      bytesPerDay: 2_000_000,
      snapshotBytesPerDay: 20_000_000,
    });
    expect(station.storage).toEqual({ directory: '/etc/forebay/state', maxMb: 512 });
    expect(station.publish).toEqual({ changePct: 20, minIntervalS: 300, atLeastS: 7200 });
    expect(station.asks).toEqual(['readings', 'journal', 'snapshots', 'fetch', 'acknowledge']);
  });

  it('measures as the contract says', () => {
    expect(point.measure).toEqual({
      everyS: 10,
      velocity: { fmaxHz: 1000, lines: 3200, averages: 4, window: 'hann' },
      bands: [
        { id: 'low', range: { hz: [2, 10] } },
        { id: 'running-speed', range: { orders: [0.8, 1.2] } },
        { id: 'harmonics', range: { orders: [1.8, 10.2] } },
      ],
      envelope: { bandHz: [500, 16_000], fmaxHz: 'auto', lines: 1600, averages: 4 },
    });
    expect(point).toMatchObject({
      at: 'bearing',
      direction: 'horizontal',
      ratio: 1,
      thrust: false,
      severity: null,
    });
    expect(station.machines[0]).toMatchObject({
      shaft: null,
      running: { kind: 'velocity', aboveMmS: 0.5 },
      startDelayS: 20,
      motor: { poles: null, supply: null },
    });
  });

  it('is judged by the default rules', () => {
    const watched = station.rules.map(({ id, watch, onDelayS, offDelayS, readings }) => ({
      id,
      watch,
      onDelayS,
      offDelayS,
      readings,
    }));
    expect(watched).toEqual([
      { id: 'zone', watch: 'velocity.overall', onDelayS: 30, offDelayS: 60, readings: null },
      { id: 'bearing', watch: 'envelope.defect', onDelayS: 0, offDelayS: 60, readings: [3, 5] },
      { id: 'sensor', watch: '', onDelayS: 30, offDelayS: 60, readings: null },
    ]);
    expect(station.rules[0]!.deadband).toEqual({ pct: 10 });
  });
});

describe('a station file with one of everything', () => {
  const station = stationOf(goodText);
  const [pump1, pump2] = station.machines;

  it('lays measuring settings of station, machine and point over each other', () => {
    expect(pump1!.points[0]!.measure.velocity).toEqual({
      fmaxHz: 800,
      lines: 1600,
      averages: 4,
      window: 'hann',
    });
    expect(pump2!.points[0]!.measure).toEqual({
      everyS: 5,
      velocity: { fmaxHz: 800, lines: 800, averages: 4, window: 'flat-top' },
      bands: [{ id: 'vanes', range: { orders: [4.5, 5.5] } }],
      envelope: { bandHz: 'auto', fmaxHz: 'auto', lines: 1600, averages: 4 },
    });
  });

  it('puts bearings, sensor and severity at each point', () => {
    const [h, a] = pump1!.points;
    expect(h!.bearings).toEqual([
      {
        id: 'de',
        elements: 9,
        geometry: { elementMm: 7.938, pitchMm: 39.04, contactDeg: 0 },
        multiples: null,
      },
      {
        id: 'nde',
        elements: null,
        geometry: null,
        multiples: { ftf: 0.382, bsf: 1.994, bpfo: 3.053, bpfi: 4.947 },
      },
    ]);
    expect(h!.sensor).toEqual({ usableHz: [2, 10_000], rangeG: 16, mount: 'stud' });
    expect(h!.severity).toEqual({ table: 'iso-10816-7', category: 'I', ratedKw: 45 });
    expect(a!.sensor).toEqual({ usableHz: null, rangeG: null, mount: null });
    expect(a!.severity).toBeNull();
    expect(a!.key).toBe('pump-1/motor-a');
  });

  it('reads paths against the folder of the file', () => {
    expect(station.broker).toMatchObject({
      kind: 'remote',
      passwordFile: '/etc/forebay/secrets/password',
      caFile: '/etc/forebay/secrets/ca.pem',
      keyFile: null,
      clientId: 'weir-gateway',
      protocol: null,
    });
  });

  it('keeps the sensor rule whatever rules the file lists', () => {
    expect(station.rules.map((rule) => rule.id)).toEqual(['zone', 'bearing', 'high', 'sensor']);
    expect(station.rules[1]).toMatchObject({ readings: [2, 3], onDelayS: 0, test: { level: 'alert' } });
    expect(station.rules[2]).toMatchObject({
      test: { kind: 'above', alert: 12, danger: 20 },
      deadband: { unit: 2 },
      onDelayS: 30,
      points: ['pump-1/motor-h'],
    });
  });

  it('speaks 3.1.1 where the file says so', () => {
    const old = stationOf(edited('  username', '  protocol: 3.1.1\n  username'));
    expect(old.broker).toMatchObject({ protocol: 4 });
  });

  it('cannot be changed, however deep', () => {
    const deep = (value: unknown): boolean =>
      typeof value !== 'object' ||
      value === null ||
      (Object.isFrozen(value) && Object.values(value).every(deep));
    expect(deep(station)).toBe(true);
  });

  it('carries the hash of its text', () => {
    // By sha256sum of GNU coreutils over the same bytes.
    expect(stationOf(least).configHash).toBe('7c3115cc29e2');
    expect(stationOf(`${least}# a note\n`).configHash).not.toBe('7c3115cc29e2');
  });
});

describe('loading a station file', () => {
  it('says that a file cannot be read', () => {
    expect(() => loadStation('/nowhere/station.yaml')).toThrow(ForebayError);
    expect(() => loadStation('/nowhere/station.yaml')).toThrow(/cannot read \/nowhere\/station\.yaml/);
  });

  it('throws all mistakes as one error', () => {
    const path = join(mkdtempSync(join(tmpdir(), 'forebay-')), 'station.yaml');
    writeFileSync(path, edited('mains_hz: 50', 'mains_hz: 5', edited('rpm: 1480', 'rpm: 0')));
    let thrown: unknown;
    try {
      loadStation(path);
    } catch (error) {
      thrown = error;
    }
    expect(thrown).toBeInstanceOf(ConfigError);
    const { issues, message, code } = thrown as ConfigError;
    expect(code).toBe('config.invalid');
    expect(issues).toHaveLength(2);
    expect(message).toContain('has 2 mistakes');
    expect(message.split('\n')[1]).toBe(
      `${path}:1:40 site.mains_hz: is 5, expected: Frequency of the public supply in Hz, 50 or 60`,
    );
  });
});
