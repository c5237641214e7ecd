/** `forebay replay`: a recording through the code of the agent, as fast as it goes. */

import type { AlarmEffect } from '../alarm/effects.ts';
import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import type { Point, Station } from '../config/station.ts';
import type { RateUsed } from '../measure/reading.ts';
import { openRecording, type Recording } from '../snapshot/recording.ts';
import { type ReplayChannel, type ReplayEvent, type ReplayOptions, replay } from '../station/replaying.ts';
import { readingBody } from '../uplink/payload.ts';
import { lineFor } from './event-text.ts';

export interface ReplayCommandOptions {
  config: string;
  points: string;
  fullScaleG?: number;
  every?: number;
  rateHz?: number;
  firstIndex?: number;
  start?: string;
  json?: boolean;
}

export interface Output {
  write(text: string): unknown;
}

/** A rate this far from what the link expects is another recording's, not another clock's. */
const RATE_FAR_OFF = 0.1;

/** Lines of JSON, or of text for a person, for all that the recording gives. */
export async function replayCommand(
  file: string,
  options: ReplayCommandOptions,
  out: Output = process.stdout,
  err: Output = process.stderr,
): Promise<number> {
  const station = withEvery(loadStation(options.config), options.every);
  const recording = openRecording(file);
  try {
    const events = replay(station, recording, replayOptionsFor(station, recording, options, err));
    for (const event of events) {
      const line = lineOf(event);
      if (line) out.write(`${options.json ? JSON.stringify(line) : lineFor(line)}\n`);
    }
    return 0;
  } finally {
    recording.close();
  }
}

/** How a recording is replayed: which channel is which point, at what rate, from when on. */
export function replayOptionsFor(
  station: Station,
  recording: Recording,
  options: Omit<ReplayCommandOptions, 'config' | 'every' | 'json'>,
  err: Output,
): ReplayOptions {
  const { tags } = recording;
  const channels = channelsFor(station, recording, options.points, options.fullScaleG ?? null);
  return {
    channels,
    nominalRateHz: tags?.nominalRateHz ?? nominalRate(station, channels, recording.rateHz, err),
    rate: rateOf(recording, options.rateHz),
    firstIndex: options.firstIndex ?? tags?.firstIndex ?? 0,
    startMs: startOf(options.start ?? tags?.start),
  };
}

/** The payload of topics.md with what says whose it is; null for what is not printed. */
export type PrintedLine = { kind: string; machine: string } & Record<string, unknown>;

export function lineOf(event: ReplayEvent): PrintedLine | null {
  if (event.kind === 'effect') return alarmOrFindingLine(event.effect);
  const { machine, point, id, t, reading } = event;
  return { kind: 'reading', machine, point, id, ...readingBody(t, reading) };
}

function alarmOrFindingLine(effect: AlarmEffect): PrintedLine | null {
  if (effect.kind !== 'publish' || effect.class === 'state') return null;
  const [machine = '', , alarm = ''] = effect.topic.split('/');
  if (effect.class === 'finding') return { kind: 'finding', machine, ...effect.payload };
  return { kind: 'alarm', machine, alarm, ...effect.payload };
}

function usage(message: string): ForebayError {
  return new ForebayError('command.usage', message);
}

function startOf(text: string | undefined): number {
  if (text === undefined) return 0;
  const ms = Date.parse(text);
  if (Number.isNaN(ms)) throw usage(`--start ${text}: an ISO 8601 time is wanted, as 2026-03-02T10:15:30Z`);
  return ms;
}

function rateOf({ rateHz, tags }: Recording, givenHz: number | undefined): RateUsed {
  if (givenHz !== undefined) return { hz: givenHz, source: 'given', ppm: null };
  return tags?.rate ?? { hz: rateHz, source: 'nominal', ppm: null };
}

export function withEvery(station: Station, everyS: number | undefined): Station {
  if (everyS === undefined) return station;
  const machines = station.machines.map((machine) => ({
    ...machine,
    points: machine.points.map((point) => ({ ...point, measure: { ...point.measure, everyS } })),
  }));
  return { ...station, machines };
}

/** What sizes the records: the rate that the link expects, where the recording can be of that link, else its own. */
function nominalRate(
  station: Station,
  channels: readonly ReplayChannel[],
  rateHz: number,
  err: Output,
): number {
  const id = channels[0]?.point.link;
  const format = station.links.find((link) => link.id === id)?.format;
  const expected = format?.kind === 'columns' ? format.sampleRateHz : (format?.expect.sampleRateHz ?? null);
  if (expected === null || expected === rateHz) return rateHz;
  if (Math.abs(rateHz / expected - 1) <= RATE_FAR_OFF) return expected;
  err.write(
    `replay: link ${id} expects ${expected} Hz; records are sized for the ${rateHz} Hz of the recording\n`,
  );
  return rateHz;
}

/** Which point or tachometer each channel of the recording is. */
function channelsFor(
  station: Station,
  recording: Recording,
  list: string,
  fullScaleG: number | null,
): ReplayChannel[] {
  const names = list.split(',').map((name) => name.trim());
  if (names.length !== recording.channels) {
    throw usage(
      `--points names ${names.length} channels and the recording has ${recording.channels}; use - to skip one`,
    );
  }
  const tachometers = new Map<string, number>();
  const points: Omit<ReplayChannel, 'tachometer' | 'toldShaftHz'>[] = [];
  names.forEach((name, channel) => {
    if (name === '-') return;
    const place = findPoint(station, name);
    if (place) {
      if (points.some(({ point }) => point.key === name)) throw usage(`--points names ${name} twice`);
      points.push({ ...place, channel, ...scaleOf(recording, channel, place.point, fullScaleG) });
    } else if (isTachometer(station, name)) tachometers.set(name, channel);
    else throw usage(`--points: ${name} is no point and no tachometer of this station; ${known(station)}`);
  });
  if (points.length === 0) throw usage('--points names no point to measure');
  points.sort((a, b) => order(station, a.point.key) - order(station, b.point.key));
  return points.map((entry) => {
    const tachometer = tachometerOf(entry, tachometers);
    return { ...entry, tachometer, toldShaftHz: tachometer ? null : toldShaftHz(entry, recording) };
  });
}

/** What came from outside when the snapshot was taken: over MQTT, or from a tachometer at another node. */
function toldShaftHz(
  { machine, point }: Pick<ReplayChannel, 'machine' | 'point'>,
  { tags }: Recording,
): number | null {
  const { shaft } = machine;
  // The speed is remembered of the machine; behind a gear it would be another's.
  if ((shaft?.kind !== 'mqtt' && shaft?.kind !== 'tachometer') || point.ratio !== 1) return null;
  return tags?.shafts.find((told) => told.machine === machine.id)?.hz ?? null;
}

/** As the file says, unless told otherwise; as the sensor's range, where the file says nothing. */
function scaleOf(
  { tags, bitsPerSample }: Recording,
  channel: number,
  { key, sensor }: Point,
  fullScaleG: number | null,
): Pick<ReplayChannel, 'unit' | 'unitsPerCount' | 'countRange'> {
  const own = tags?.channels[channel];
  if (own && fullScaleG === null) {
    const { unit, unitsPerCount, countRange } = own;
    if (unit === 'logic') throw usage(`channel ${channel + 1} of the recording is a tachometer, not ${key}`);
    return { unit, unitsPerCount, countRange };
  }
  const scaleG = fullScaleG ?? sensor.rangeG;
  if (scaleG === null)
    throw usage(`the recording does not say its scale, nor does ${key}; give --full-scale-g`);
  const half = 2 ** (bitsPerSample - 1);
  return { unit: 'g', unitsPerCount: scaleG / half, countRange: [-half, half - 1] };
}

function findPoint(station: Station, key: string): Pick<ReplayChannel, 'machine' | 'point'> | null {
  for (const machine of station.machines) {
    const point = machine.points.find((candidate) => candidate.key === key);
    if (point) return { machine, point };
  }
  return null;
}

function isTachometer(station: Station, name: string): boolean {
  return station.machines.some(
    ({ shaft }) => shaft?.kind === 'tachometer' && `${shaft.link}/${shaft.channel}` === name,
  );
}

function tachometerOf(
  { machine }: Pick<ReplayChannel, 'machine'>,
  tachometers: ReadonlyMap<string, number>,
): ReplayChannel['tachometer'] {
  const { shaft } = machine;
  if (shaft?.kind !== 'tachometer') return null;
  const channel = tachometers.get(`${shaft.link}/${shaft.channel}`);
  return channel === undefined ? null : { channel, pulsesPerRev: shaft.pulsesPerRev };
}

function order(station: Station, key: string): number {
  return station.machines.flatMap(({ points }) => points.map((point) => point.key)).indexOf(key);
}

function known(station: Station): string {
  const keys = station.machines.flatMap(({ points }) => points.map((point) => point.key));
  return `there are ${keys.slice(0, 12).join(', ')}${keys.length > 12 ? ' …' : ''}`;
}
