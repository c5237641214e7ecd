/** The report command: what it takes, what it refuses, and that a page is bounded and harmless. */
import { execFileSync } from 'node:child_process';
import { existsSync, readFileSync, statSync, writeFileSync } from 'node:fs';
import { afterAll, describe, expect, it } from 'vitest';
import { reportCommand } from '../../src/cli/report.ts';
import { wavBytes } from '../support/wav.ts';
import {
  demoStation,
  figuresOf,
  inFolder,
  removeFolder,
  report,
  snapshot,
  tags,
  tone,
  write,
} from './rig.ts';

afterAll(removeFolder);

const three = (unitsPerCount: number) =>
  ['h', 'v', 'a'].map((name) => ({
    name,
    points: [`pump-3/motor-de-${name}`],
    unit: 'g' as const,
    unitsPerCount,
    countRange: null,
  }));

describe('the report command', () => {
  it('makes a page of a snapshot alone, with the speed that its tags tell, and says what is missing', async () => {
    const file = await snapshot('alone.flac', [tone(25, 0.5, 9)], tags());
    const { text } = await report({ file, config: null });
    const figures = figuresOf(text);
    expect(figures.get('pump-3/motor-de-h/shaft.hz')).toBe('25');
    // 0.5 g at 25 Hz and a fifth of it at 50 Hz, RMS: 1000·9.80665·0.5/(2π·25·√2), and a tenth of that (kinematics).
    const first = (1000 * 9.80665 * 0.5) / (2 * Math.PI * 25 * Math.SQRT2);
    const overall = Number(figures.get('pump-3/motor-de-h/velocity.overall'));
    expect(overall / Math.hypot(first, first / 10)).toBeCloseTo(1, 3);
    expect(text).toContain('no station file was given');
    expect(text).toContain('clock not synchronised: the time of day is a guess');
    expect(text).toContain('25600 Hz, measured, within 12 ppm');
    expect(text).toContain('Advice only.');
  });

  it('says that the settings are others than those of the recording', async () => {
    const file = await snapshot('settings.flac', [tone(25, 0.5, 5)], tags());
    const { text } = await report({ file, config: demoStation });
    expect(text).toMatch(/those of [0-9a-f]{12}; the recording was made under 0123456789ab/);
  });

  it('gives no figures where samples are missing, and says why', async () => {
    const gaps = [{ at: 60_000, samples: 64 }];
    const file = await snapshot('gaps.flac', [tone(25, 0.5, 5)], tags({ gaps }));
    const { text } = await report({ file, config: demoStation });
    expect(figuresOf(text).get('pump-3/motor-de-h/velocity.overall')).toBe('–');
    expect(text).toContain('gap: 64 samples missing');
    expect(text).toContain('64 samples never came');
  });

  it('takes a WAV file with a station and points, and refuses one without', async () => {
    const wav = inFolder('one.wav');
    writeFileSync(wav, wavBytes([tone(24.67, 0.5, 5)], 25_600, 16));
    const options = { file: wav, out: inFolder('wav.html'), version: '0' };
    await expect(reportCommand({ ...options, config: null })).rejects.toThrow(
      /give the station file with -c/,
    );
    await expect(reportCommand({ ...options, config: demoStation })).rejects.toThrow(/give --points/);
    const { text } = await report({
      file: wav,
      config: demoStation,
      points: 'pump-3/motor-de-h',
      fullScaleG: 16,
    });
    expect(Number(figuresOf(text).get('pump-3/motor-de-h/orders.1.mm_s'))).toBeGreaterThan(20);
  });

  it('writes over nothing unless told to, and leaves nothing half written', async () => {
    const file = await snapshot('over.flac', [tone(25, 0.5, 5)], tags());
    const out = write('there.html', 'mine');
    const options = { file, config: null, out, version: '0' };
    await expect(reportCommand(options)).rejects.toMatchObject({ code: 'command.usage' });
    expect(readFileSync(out, 'utf8')).toBe('mine');
    expect(await reportCommand({ ...options, force: true })).toBe(0);
    expect(readFileSync(out, 'utf8')).toContain('<!doctype html>');
    expect(existsSync(`${out}.part`)).toBe(false);
    await expect(reportCommand({ ...options, out: file, force: true })).rejects.toThrow(
      /the recording itself/,
    );
    await expect(reportCommand({ ...options, out: inFolder('no/such/folder.html') })).rejects.toThrow(
      /cannot write/,
    );
  });

  it('shows of a journal the lines of its machines, and names a line that is none', async () => {
    const file = await snapshot('journal.flac', [tone(25, 0.5, 5)], tags());
    const line = (machine: string, reason: string) =>
      JSON.stringify({
        kind: 'alarm',
        machine,
        alarm: 'motor-de-h.zone',
        t: '2026-03-01T00:00:00.000Z',
        state: 'unacknowledged',
        level: 'alert',
        value: 4.2,
        unit: 'mm/s',
        reason,
      });
    const journal = write('journal.jsonl', `${line('pump-3', 'ours')}\n${line('pump-9', 'another')}\n`);
    const { text } = await report({ file, config: demoStation, journal });
    expect(text).toContain('<td data-label="Reason">ours</td>');
    expect(text).toContain('<td data-label="Value">4.2 mm/s</td>');
    expect(text).not.toContain('another');
    const bad = write('bad.jsonl', `${line('pump-3', 'ours')}\nnot json\n`);
    await expect(report({ file, config: demoStation, journal: bad })).rejects.toThrow(/bad\.jsonl:2 /);
  });

  it('shows hostile tags as the text that they are', async () => {
    const hostile = '<script>window.hostile=1</script><img src=x onerror="window.hostile=1">"\'&';
    const file = await snapshot(
      'hostile.flac',
      [tone(25, 0.5, 5)],
      tags({ cause: hostile, nodeSerial: hostile, version: hostile, id: hostile }),
    );
    const { text } = await report({ file, config: null });
    expect(text).not.toContain('<script>window');
    expect(text).not.toContain('<img');
    expect(text.match(/&lt;script&gt;window\.hostile=1/g)).toHaveLength(4);
  });

  it.each([
    [10, 16, 2 ** -11],
    [15, 24, 2 ** -19],
  ])(
    'stays under 8 MB with %i s of three channels at 40 960 Hz in %i bit',
    async (seconds, bits, unitsPerCount) => {
      const scale = 2 ** (bits - 16);
      const counts = ['h', 'v', 'a'].map(() => tone(25, 4, seconds, 40_960).map((count) => count * scale));
      const rate = { hz: 40_960, source: 'measured', ppm: 5 } as const;
      const file = await snapshot(
        `long-${bits}.flac`,
        counts,
        tags({ nominalRateHz: 40_960, rate, channels: three(unitsPerCount) }),
      );
      const { path, text } = await report({ file, config: demoStation });
      expect(statSync(path).size).toBeLessThan(8e6);
      // Every single sample is in it.
      expect(text.match(/"block":1,/g)).toHaveLength(3);
    },
  );

  it('works from the built package, which holds all that a page is made of', async () => {
    const file = await snapshot('built.flac', [tone(25, 0.5, 5)], tags());
    const built = new URL('../../dist/cli/report.js', import.meta.url).href;
    const options = { file, config: null, out: inFolder('built.html'), version: '0.0.1' };
    const program =
      `import { reportCommand } from ${JSON.stringify(built)};` +
      `process.exitCode = await reportCommand(${JSON.stringify(options)});`;
    execFileSync(process.execPath, ['--input-type=module', '-e', program], { stdio: 'pipe' });
    const { text } = await report({ file, config: null });
    expect(figuresOf(readFileSync(options.out, 'utf8'))).toEqual(figuresOf(text));
    expect(readFileSync(options.out, 'utf8')).toContain('new uPlot(');
  });

  it('stays under 8 MB with a recording that does not fit, by the extremes of blocks', async () => {
    const file = await snapshot('minutes.flac', [tone(25, 0.5, 200)], tags());
    const { path, text } = await report({ file, config: null });
    expect(statSync(path).size).toBeLessThan(8e6);
    expect(text).toContain('The page holds the extremes of each 4 samples.');
  });
});
