/** Recordings and reports of them in a folder of their own, through the commands. */
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { replayCommand } from '../../src/cli/replay.ts';
import { type ReportCommandOptions, reportCommand } from '../../src/cli/report.ts';
import { writeSnapshot } from '../../src/snapshot/flac-write.ts';
import type { SnapshotTags } from '../../src/snapshot/tags.ts';

export const demoData = fileURLToPath(new URL('../../demo-data', import.meta.url));
export const demoStation = join(demoData, 'station.yaml');
const demoPoints = 'pump-3/motor-de-h,pump-3/motor-de-v,pump-3/motor-de-a';

const folder = mkdtempSync(join(tmpdir(), 'forebay-report-'));
export const inFolder = (name: string) => join(folder, name);
export const removeFolder = () => rmSync(folder, { recursive: true, force: true });

/** Tags as a snapshot of the invented station has them. */
export function tags(more: Partial<SnapshotTags> = {}): SnapshotTags {
  return {
    id: 'test-1',
    site: 'elm-sluice',
    machines: ['pump-3'],
    link: 'node-1',
    nominalRateHz: 25_600,
    rate: { hz: 25_600, source: 'measured', ppm: 12 },
    start: '2026-03-02T18:00:00.000Z',
    clock: 'free',
    firstIndex: 512_000,
    nodeSerial: null,
    shafts: [{ machine: 'pump-3', hz: 25, source: 'spectrum' }],
    cause: 'asked for',
    kind: 'asked',
    alarms: [],
    takenRunS: 60,
    version: '0.0.1',
    config: '0123456789ab',
    gaps: [],
    channels: [
      { name: 'h', points: ['pump-3/motor-de-h'], unit: 'g', unitsPerCount: 2 ** -11, countRange: null },
    ],
    ...more,
  };
}

export async function snapshot(name: string, counts: Int32Array[], made: SnapshotTags): Promise<string> {
  const path = inFolder(name);
  await writeSnapshot({ path, counts, tags: made });
  return path;
}

/** A tone with its second harmonic and some noise of the converter, in counts of 2^−11 g. */
export function tone(hz: number, amplitudeG: number, seconds: number, rateHz = 25_600): Int32Array {
  return Int32Array.from({ length: Math.round(seconds * rateHz) }, (_, i) => {
    const turn = (2 * Math.PI * hz * i) / rateHz;
    return Math.round(2048 * amplitudeG * (Math.sin(turn) + 0.2 * Math.sin(2 * turn))) + ((i * 7919) % 3) - 1;
  });
}

export async function report(options: Omit<ReportCommandOptions, 'out' | 'version'>): Promise<{
  path: string;
  text: string;
}> {
  const path = inFolder(`report-${Math.round(performance.now() * 1000)}.html`);
  const status = await reportCommand({ ...options, out: path, version: '0.0.1' });
  if (status !== 0) throw new Error(`report ended with ${status}`);
  return { path, text: readFileSync(path, 'utf8') };
}

export type Line = Record<string, unknown> & { kind: string; t: string; point: string };

/** The lines of `replay --json`. */
export async function replayLines(file: string, config = demoStation, points = demoPoints): Promise<Line[]> {
  let text = '';
  await replayCommand(file, { config, points, json: true }, { write: (part) => (text += part) });
  return text
    .trim()
    .split('\n')
    .map((line) => JSON.parse(line) as Line);
}

export function write(name: string, text: string): string {
  writeFileSync(inFolder(name), text);
  return inFolder(name);
}

/** `data-figure` paths of a page with what they show. */
export function figuresOf(text: string): Map<string, string> {
  return new Map(
    [...text.matchAll(/data-figure="([^"]+)">([^<]*)</g)].map(([, path, value]) => [path!, value!]),
  );
}
