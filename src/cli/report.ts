/** `forebay report`: a recording as one page to read, print and pass on. */

import { readFileSync, renameSync, rmSync, statSync, writeFileSync } from 'node:fs';
import { basename, resolve } from 'node:path';
import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import type { Station } from '../config/station.ts';
import { bareStation } from '../report/bare-station.ts';
import { type AlarmLine, type ReportReading, reportModel } from '../report/model.ts';
import { reportPage } from '../report/page.ts';
import { openRecording, type Recording } from '../snapshot/recording.ts';
import { replay } from '../station/replaying.ts';
import { lineOf, type Output, type ReplayCommandOptions, replayOptionsFor, withEvery } from './replay.ts';

export interface ReportCommandOptions extends Partial<Omit<ReplayCommandOptions, 'config' | 'json'>> {
  readonly file: string;
  /** null: a snapshot is reported with default settings. */
  readonly config: string | null;
  readonly out: string;
  /** Lines of `forebay journal --json`. */
  readonly journal?: string;
  /** Writes over a file that exists. */
  readonly force?: boolean;
  /** Of Forebay. */
  readonly version: string;
}

const MAX_JOURNAL_BYTES = 16_000_000;

/** Measures the recording as `replay` does and writes the page. */
export async function reportCommand(
  options: ReportCommandOptions,
  err: Output = process.stderr,
): Promise<number> {
  const { file, out, force = false } = options;
  if (resolve(out) === resolve(file))
    throw usage(`${out} is the recording itself; name another file with -o`);
  if (!force && statSync(out, { throwIfNoEntry: false }) !== undefined) {
    throw usage(`${out} exists already; give --force to write over it`);
  }
  const recording = openRecording(file);
  try {
    const page = pageOf(recording, options, err);
    writeWhole(out, page);
    return 0;
  } finally {
    recording.close();
  }
}

function pageOf(recording: Recording, options: ReportCommandOptions, err: Output): string {
  const { file, config, version } = options;
  const { tags } = recording;
  if (config === null && tags === null) {
    throw usage(`${file} does not say what it holds; give the station file with -c and --points`);
  }
  const station = withEvery(config === null ? bareStation(tags!, file) : loadStation(config), options.every);
  const points = options.points ?? pointsOfTags(recording, station);
  if (points === null) throw usage(`${file} does not say which points it holds; give --points`);
  const how = replayOptionsFor(station, recording, { ...options, points }, err);
  const readings: ReportReading[] = [];
  const alarms: AlarmLine[] = [];
  for (const event of replay(station, recording, how)) {
    if (event.kind === 'reading') {
      const { machine, point, t, reading } = event;
      readings.push({ key: `${machine}/${point}`, t, reading });
      continue;
    }
    const line = lineOf(event);
    if (line?.kind === 'alarm') alarms.push(line);
  }
  const machines = new Set(how.channels.map(({ machine }) => machine.id));
  const start = options.start ?? tags?.start ?? null;
  return reportPage(
    reportModel({
      station,
      stationGiven: config !== null,
      fileName: basename(file),
      recording,
      channels: how.channels,
      nominalRateHz: how.nominalRateHz,
      rate: how.rate,
      firstIndex: how.firstIndex,
      start: start === null ? null : new Date(how.startMs).toISOString(),
      readings,
      alarms,
      journal: options.journal === undefined ? null : journalOf(options.journal, machines),
      version,
    }),
  );
}

/** As `--points` would name them: of each channel the first point that the station has, a tachometer by its link. */
function pointsOfTags({ tags }: Recording, station: Station): string | null {
  if (tags === null) return null;
  const known = new Set(station.machines.flatMap(({ points }) => points.map(({ key }) => key)));
  const tachometers = new Set(
    station.machines.map(({ shaft }) =>
      shaft?.kind === 'tachometer' ? `${shaft.link}/${shaft.channel}` : '',
    ),
  );
  return tags.channels
    .map(({ points, name }) => {
      const tachometer = `${tags.link}/${name}`;
      const point = points.find((key) => known.has(key)) ?? points[0];
      return point ?? (tachometers.has(tachometer) ? tachometer : '-');
    })
    .join(',');
}

/** Alarm changes and notes of these machines. */
function journalOf(path: string, machines: ReadonlySet<string>): AlarmLine[] {
  let text: string;
  try {
    if (statSync(path).size > MAX_JOURNAL_BYTES) {
      throw usage(
        `${path} is longer than ${MAX_JOURNAL_BYTES / 1e6} MB; take a shorter time with journal --since`,
      );
    }
    text = readFileSync(path, 'utf8');
  } catch (error) {
    if (error instanceof ForebayError) throw error;
    throw new ForebayError('file.unreadable', `cannot read ${path}: ${(error as Error).message}`, {
      cause: error,
    });
  }
  return text
    .split('\n')
    .filter((line) => line.trim() !== '')
    .map((line, index) => {
      try {
        const entry: unknown = JSON.parse(line);
        if (typeof entry === 'object' && entry !== null) return entry as AlarmLine;
      } catch {
        // Said below.
      }
      throw usage(`${path}:${index + 1} is no line of \`forebay journal --json\``);
    })
    .filter(({ machine }) => typeof machine === 'string' && machines.has(machine));
}

/** Under another name first: what bears the name is always whole. */
function writeWhole(path: string, text: string): void {
  const partial = `${path}.part`;
  try {
    writeFileSync(partial, text);
    renameSync(partial, path);
  } catch (error) {
    rmSync(partial, { force: true });
    throw usage(`cannot write ${path}: ${(error as Error).message}`);
  }
}

function usage(message: string): ForebayError {
  return new ForebayError('command.usage', message);
}
