import { spawnSync } from 'node:child_process';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { command } from '../support/agent.ts';
import { pumpCounts } from '../support/pump-signal.ts';
import { wavBytes } from '../support/wav.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-replay-'));
const station = join(folder, 'station.yaml');
const rateHz = 12_000;
const fullScaleG = 8;
const gPerCount = fullScaleG / 2 ** 15;

beforeAll(() => {
  writeFileSync(
    station,
    `
site: {id: test-weir, name: Test weir, mains_hz: 50}
links:
  - {id: node-1, serial: {path: /dev/null, baud: 3000000}, format: frames, expect: {channels: [h, v, tach]}}
machines:
  - id: pump-1
    name: Duty pump 1
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {tachometer: {link: node-1, channel: tach, pulses_per_rev: 1}}
    start_delay_s: 0
    points:
      - {id: h, link: node-1, channel: h, direction: horizontal, part: pump}
      - {id: v, link: node-1, channel: v, direction: vertical, part: pump}
alarms:
  - {id: zone, watch: velocity.overall, zones: true, on_delay_s: 4, off_delay_s: 60, deadband_pct: 10}
`,
  );
});
afterAll(() => rmSync(folder, { recursive: true, force: true }));

function tone(velocityMmS: number, seconds: number, seed: number): Int32Array {
  const signal = { rateHz, seconds, gPerCount, knocks: null, noiseG: 0.01 };
  return pumpCounts({ ...signal, tone: { hz: 25, velocityMmS }, seed });
}

/** One pulse a turn at 25 Hz, eight samples wide. */
function pulses(seconds: number): Int32Array {
  return Int32Array.from({ length: seconds * rateHz }, (_, i) => (i % 480 < 8 ? 1 : 0));
}

function replay(name: string, channels: Int32Array[], ...args: string[]) {
  const file = join(folder, name);
  writeFileSync(file, wavBytes(channels, rateHz, 16));
  return spawnSync(process.execPath, [command, 'replay', file, '-c', station, ...args], { encoding: 'utf8' });
}

function lines(text: string): Record<string, unknown>[] {
  return text
    .split('\n')
    .filter(Boolean)
    .map((line) => JSON.parse(line) as Record<string, unknown>);
}

const points = ['--points', 'pump-1/h,pump-1/v,node-1/tach', '--full-scale-g', String(fullScaleG)];

describe('forebay replay', () => {
  it('prints readings and alarms as payloads, one JSON object a line, time taken from the recording', () => {
    const run = replay(
      'a.wav',
      [tone(8, 24, 1), tone(1, 24, 2), pulses(24)],
      ...points,
      '--every',
      '2',
      '--json',
    );
    expect(run.stderr).toBe('');
    expect(run.status).toBe(0);
    const said = lines(run.stdout);
    const readings = said.filter(({ kind }) => kind === 'reading');
    const alarms = said.filter(({ kind }) => kind === 'alarm');
    for (const reading of readings) expect(payloadSchemas.reading.safeParse(reading).error).toBeUndefined();
    for (const alarm of alarms) expect(payloadSchemas.alarm.safeParse(alarm).error).toBeUndefined();
    // Records of 8 s and a little, each 2 s: the last that fits in 24 s starts at 14 s.
    expect(readings.map(({ first_index }) => first_index)).toEqual(
      [0, 2, 4, 6, 8, 10, 12, 14].flatMap((s) => [s * rateHz, s * rateHz]),
    );
    expect(readings.every(({ machine }) => machine === 'pump-1')).toBe(true);
    expect(readings[0]).toMatchObject({ point: 'h', shaft: { hz: 25, source: 'tachometer' }, zone: 'D' });
    expect(readings[1]).toMatchObject({ point: 'v', zone: 'A' });
    expect(String(readings[0]?.t)).toMatch(/^1970-01-01T00:00:08/);
    // Over 6.6 mm/s (C/D of category I up to 200 kW) from the first reading on; 4 s later it has lasted.
    const [first] = alarms;
    expect(first).toMatchObject({
      alarm: 'h.zone',
      state: 'unacknowledged',
      level: 'danger',
      limit: 6.6,
      unit: 'mm/s',
    });
    expect(String(first?.t)).toMatch(/^1970-01-01T00:00:12/);
    expect(String(first?.since)).toMatch(/^1970-01-01T00:00:08/);
    expect(alarms.some(({ alarm }) => alarm === 'v.zone')).toBe(false);
  });

  it('takes rate, first index and start from the command line', () => {
    const channels = [tone(2, 12, 3), tone(2, 12, 4), pulses(12)];
    const given = ['--rate-hz', '12006', '--first-index', '240000', '--start', '2026-03-02T10:15:30Z'];
    const run = replay('b.wav', channels, ...points, ...given, '--json');
    const [reading] = lines(run.stdout);
    expect(reading).toMatchObject({ first_index: 240_000, rate: { hz: 12_006, source: 'given' } });
    expect(String(reading?.t)).toMatch(/^2026-03-02T10:15:3[89]/);
  });

  it('measures a recording that is shorter than the record with less, and says so', () => {
    const run = replay('c.wav', [tone(2, 3, 5), tone(2, 3, 6), pulses(3)], ...points, '--json');
    const [reading] = lines(run.stdout);
    expect(reading?.why).toEqual(expect.arrayContaining([expect.stringContaining('record too short')]));
    const velocity = reading?.velocity as { overall: number } | undefined;
    expect(velocity?.overall).toBeCloseTo(2, 1);
  });

  it('prints lines for a person without --json', () => {
    const run = replay('d.wav', [tone(8, 14, 7), tone(1, 14, 8), pulses(14)], ...points, '--every', '1');
    expect(run.stdout).toMatch(
      /^1970-01-01T00:00:08\.\d+Z pump-1\/h velocity 8\.00\d mm\/s, zone D, shaft 25 Hz/m,
    );
    expect(run.stdout).toMatch(/ALARM pump-1\/h\.zone unacknowledged danger .*6\.6/);
  });

  it.each([
    [['--points', 'pump-1/h'], /names 1 channels and the recording has 3/],
    [
      ['--points', 'pump-1/h,pump-1/x,-', '--full-scale-g', '8'],
      /pump-1\/x is no point .*pump-1\/h, pump-1\/v/,
    ],
    [['--points', 'pump-1/h,-,-'], /does not say its scale.*--full-scale-g/],
    [['--points', '-,-,-', '--full-scale-g', '8'], /no point to measure/],
    [[...points, '--start', 'yesterday'], /ISO 8601/],
    [[...points, '--full-scale-g', '-1'], /above 0/],
  ])('refuses %j with status 2 and says why', (args, why) => {
    const run = replay('e.wav', [tone(2, 1, 9), tone(2, 1, 10), pulses(1)], ...args);
    expect(run.stderr).toMatch(why);
    expect(run.status).toBe(2);
    expect(run.stdout).toBe('');
  });

  it('fails with status 1 on what is no recording', () => {
    const file = join(folder, 'no.wav');
    writeFileSync(file, 'no recording, but long enough to be looked at as one would be');
    const run = spawnSync(process.execPath, [command, 'replay', file, '-c', station, ...points], {
      encoding: 'utf8',
    });
    expect(run.status).toBe(1);
    expect(run.stderr).toMatch(/does not begin as a RIFF\/WAVE file/);
  });
});
