import { mkdtempSync, readdirSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';
import { checkCommand } from '../../src/cli/check.ts';
import { edited, goodText } from '../config/station-text.ts';

const folder = fileURLToPath(new URL('../../config/', import.meta.url));
const samples = readdirSync(folder).filter((name) => name.endsWith('.yaml'));

interface Checked {
  readonly status: number;
  readonly out: string;
  readonly err: string;
}

async function check(config: string, json = false): Promise<Checked> {
  const written = { out: '', err: '' };
  const status = await checkCommand({
    config,
    json,
    out: { write: (text: string) => (written.out += text) },
    err: { write: (text: string) => (written.err += text) },
  });
  return { status, ...written };
}

function fileWith(text: string): string {
  const path = join(mkdtempSync(join(tmpdir(), 'forebay-')), 'station.yaml');
  writeFileSync(path, text);
  return path;
}

// biome-ignore lint/suspicious/noExplicitAny: what a reader of the JSON lines sees
type Line = Record<string, any>;

async function objects(text: string): Promise<Line[]> {
  const { out, err } = await check(fileWith(text), true);
  expect(err).toBe('');
  return out
    .trimEnd()
    .split('\n')
    .map((line) => JSON.parse(line) as Line);
}

async function pointOf(text: string, key: string): Promise<Line> {
  return (await objects(text)).find((line) => line.kind === 'point' && line.point === key)!;
}

async function warningsOf(text: string): Promise<string[]> {
  const lines = await objects(text);
  return lines.filter((line) => line.kind === 'warning').map((line) => `${line.where}: ${line.text}`);
}

describe('check on the sample stations', () => {
  it('has samples to check', () => {
    expect(samples).toContain('minimal.yaml');
    expect(samples).toContain('two-pumps.yaml');
  });

  it.each(samples)('%s is valid', async (name) => {
    const { status, out, err } = await check(join(folder, name));
    expect(err).toBe('');
    expect(status).toBe(0);
    expect(out).toMatch(/^point /m);
  });

  it('says what depends on the node where the file does not tell', async () => {
    const { out } = await check(join(folder, 'minimal.yaml'));
    expect(out).toContain('known when the node speaks');
  });
});

describe('check on a wrong file', () => {
  it('lists the places on standard error and ends with 2', async () => {
    const path = fileWith(edited('mains_hz: 50', 'mains_hz: 5', edited('vanes: 6', 'vanes: -6')));
    const { status, out, err } = await check(path, true);
    expect(status).toBe(2);
    expect(out).toBe('');
    expect(err).toContain(`${path}:1:40 site.mains_hz: `);
    expect(err).toContain(`${path}:28:12 machines.0.vanes: `);
  });

  it('ends with 2 where there is no file', async () => {
    const { status, err } = await check('/nowhere/station.yaml');
    expect(status).toBe(2);
    expect(err).toContain('/nowhere/station.yaml');
  });
});

describe('what follows from the settings', () => {
  it('derives rates, lines and record', async () => {
    const point = await pointOf(goodText, 'pump-1/motor-h');
    // 25 600 Hz / 12 = 2133 Hz is the least that carries 800 Hz at 2.56 samples a cycle; T = lines / Fmax = 2 s.
    expect(point.rate_hz).toBe(25_600);
    expect(point.decimated_hz * point.decimation).toBeCloseTo(25_600, 6);
    expect(point.decimated_hz).toBeGreaterThanOrEqual(2.56 * 800);
    expect(point).toMatchObject({ fmax_hz: 800, lines: 1600, line_hz: 0.5, every_s: 10, record_s: 10 });
    expect(point.overall_hz).toEqual([10, 800]);
  });

  it('gives bearing frequencies and vane pass at the nominal speed', async () => {
    const point = await pointOf(goodText, 'pump-1/motor-h');
    expect(point.shaft_hz).toBeCloseTo(1480 / 60, 9);
    expect(point.vane_pass_hz).toBeCloseTo(148, 9);
    // The Case Western bearing data center publishes 3.5848 and 5.4152 for this bearing in inches.
    expect(point.bearings[0].multiples.bpfo).toBeCloseTo(3.5848, 3);
    expect(point.bearings[0].multiples.bpfi).toBeCloseTo(5.4152, 3);
    expect(point.bearings[0].hz.bpfo).toBeCloseTo((3.5848 * 1480) / 60, 1);
    expect(point.bearings[1]).toMatchObject({
      id: 'nde',
      certain: true,
      multiples: { bpfo: 3.053, bpfi: 4.947 },
    });
  });

  it('gives alarm limits with their source', async () => {
    const point = await pointOf(goodText, 'pump-1/motor-h');
    // ISO 10816-7:2009 Table A.1, category I up to 200 kW: B/C 4.0, C/D 6.6 mm/s.
    expect(point.limits[0]).toMatchObject({ rule: 'zone', alert: 4, danger: 6.6 });
    expect(point.limits[0].by).toMatch(/ISO 10816-7 category I up to 200 kW/);
    expect(point.limits[2]).toMatchObject({ rule: 'high', alert: 12, danger: 20 });
  });

  it('gives bytes per second, their share of the line and the ring', async () => {
    const lines = await objects(goodText);
    const [frames, columns] = lines.filter((line) => line.kind === 'link');
    // Counts alone: 25 600 × 3 × 2 bytes; framing adds some percent. 8N1 takes ten bits a byte.
    const counts = 25_600 * 3 * 2;
    expect(frames!.bytes_per_s).toBeGreaterThan(counts);
    expect(frames!.bytes_per_s).toBeLessThan(1.1 * counts);
    expect(frames!.line_bytes_per_s).toBe(300_000);
    expect(frames!.share_pct).toBeCloseTo(frames!.bytes_per_s / 3000, 9);
    // "-16000,12345678\n" at its widest: 6 + 1 + 7 + 1 characters, 6400 times a second.
    expect(columns!.bytes_per_s).toBe(6400 * 15);
    expect(columns!.share_pct).toBeNull();
    const memory = lines.find((line) => line.kind === 'memory')!;
    expect(memory.ring_bytes).toBe(frames!.ring_bytes + columns!.ring_bytes);
    expect(frames!.ring_bytes).toBeGreaterThan(10 * 25_600 * 3 * 4);
  });

  it('gives more bytes on a restless day than on a quiet one', async () => {
    const uplink = (await objects(goodText)).find((line) => line.kind === 'uplink')!;
    expect(uplink.busy_bytes_per_day).toBeGreaterThan(uplink.quiet_bytes_per_day);
    // Three points, twelve readings a day each, of about 1.4 kB on the wire.
    expect(uplink.quiet_bytes_per_day).toBeGreaterThan(3 * 12 * 1000);
    expect(uplink.method).toMatch(/alarms and snapshots not counted/);
  });
});

describe('warnings', () => {
  const cases: readonly [what: string, from: string, to: string, says: RegExp][] = [
    ['a link too slow', 'baud: 3000000', 'baud: 921600', /link node-1: too slow: .* what the line carries/],
    [
      'a link too slow for 24 bit',
      'baud: 3000000',
      'baud: 2000000',
      /link node-1: too slow if the node sends 24 bit/,
    ],
    [
      'an envelope band above what the rate carries',
      'band_hz: auto',
      'band_hz: [3000, 9000]',
      /pump-2\/pump: no envelope: a rate of 6400 Hz carries 2500 Hz/,
    ],
    [
      'a sensor that ends below the envelope band',
      'usable_hz: [2, 10000]',
      'usable_hz: [2, 3000]',
      /pump-1\/motor-h: envelope band .* is cut to 500 to 3000 Hz: the sensor/,
    ],
    [
      'lines too wide for two bearing frequencies',
      'lines: 1600}',
      'lines: 1600}\n  envelope: {lines: 25}',
      /pump-1\/motor-h: envelope lines of 20 Hz cannot tell BPFO of de \(88\.43 Hz\) from BPFO of nde/,
    ],
    ['a speed that is synchronous', 'rpm: 1480', 'rpm: 1500', /pump-1: 1500 r\/min is the synchronous speed/],
    ['a speed far from synchronous', 'rpm: 1480', 'rpm: 980', /pump-1: 980 r\/min is 35 % below/],
    [
      'a run too short to be judged',
      'vanes: 6',
      'usual_run_s: 45',
      /pump-1\/motor-h: a usual run of 45 s ends before/,
    ],
    [
      'zones that do not apply',
      'bearing: de, severity: none',
      'bearing: de',
      /pump-1\/motor-a: no zones: axial zones hold only at the thrust bearing/,
    ],
    [
      'two points on one channel',
      'channel: a,',
      'channel: h,',
      /pump-1\/motor-a: measures channel node-1\/h as/,
    ],
    [
      'a secret that is not there',
      'secrets/password',
      'secrets/none',
      /broker\.password_file: .*none cannot be read/,
    ],
    [
      'a budget too small',
      '  username',
      '  bytes_per_day: 20000\n  username',
      /uplink: even a quiet day takes/,
    ],
    [
      'a rule whose values nobody can learn',
      '  - {id: high',
      '  - {id: shift, watch: acceleration.rms, baseline: {alert: 2}}\n  - {id: high',
      /rule shift: baseline is not among the asks/,
    ],
    [
      'rules of thumb',
      '{id: de, elements: 9, element_mm: 7.938, pitch_mm: 39.04}',
      '{id: de, elements: 9}',
      /pump-1\/motor-h: bearing de: geometry unknown/,
    ],
  ];

  it.each(cases)('of %s', async (_what, from, to, says) => {
    expect((await warningsOf(goodText)).join('\n')).not.toMatch(says);
    expect((await warningsOf(edited(from, to))).join('\n')).toMatch(says);
  });

  it('of harmonics of two parts that fall on one line', async () => {
    // 3 × BPFO = 8.40 and 2 × BPFI = 8.41 of shaft speed: 0.25 Hz apart at 24.7 Hz, a line is 0.31 Hz.
    const close = edited(
      '{ftf: 0.382, bsf: 1.994, bpfo: 3.053, bpfi: 4.947}',
      '{ftf: 0.4, bsf: 2.3, bpfo: 2.8, bpfi: 4.205}',
    );
    const warnings = await warningsOf(close);
    expect(warnings.join('\n')).toMatch(/cannot tell 3xBPFO \(207\.2 Hz\) from 2xBPFI \(207\.4 Hz\) of nde/);
  });

  it('do not change the exit status', async () => {
    const { status, out } = await check(fileWith(edited('rpm: 1480', 'rpm: 1500')));
    expect(status).toBe(0);
    expect(out).toMatch(/^warning: pump-1: 1500 r\/min/m);
  });
});
