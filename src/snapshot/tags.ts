/**
 * What a snapshot says of itself, as Vorbis comments of its FLAC file. Names are listed in README.md beside this file;
 * numbers are written so that they read back exactly.
 */

import type { SampleUnit } from '../link/frames.ts';
import type { RateUsed } from '../measure/reading.ts';
import type { Comments } from './flac-head.ts';

export interface SnapshotChannel {
  name: string;
  /** `<machine>/<point>` of what is measured by it; none: a tachometer or a spare channel. */
  points: readonly string[];
  unit: SampleUnit;
  unitsPerCount: number;
  /** Counts at which the converter is at its limit; null: unknown. */
  countRange: readonly [number, number] | null;
}

export interface ShaftTag {
  machine: string;
  hz: number;
  source: string;
}

/** A stretch that never came; zeros stand in its place. */
export interface Gap {
  /** Samples from the start of the recording. */
  at: number;
  samples: number;
}

export interface SnapshotTags {
  id: string;
  site: string;
  machines: readonly string[];
  link: string;
  /** What the node claims. */
  nominalRateHz: number;
  rate: RateUsed;
  /** Wall time of the first sample, ISO 8601 UTC. */
  start: string;
  /** How far `start` is to be trusted: whether the gateway's clock was set from outside. */
  clock: 'synchronised' | 'free';
  /** The node's index of the first sample. */
  firstIndex: number;
  nodeSerial: string | null;
  shafts: readonly ShaftTag[];
  /** In words. */
  cause: string;
  kind: SnapshotKind;
  /** Alarms that it was taken for. */
  alarms: readonly string[];
  /** Run time of the gateway when it was taken, in seconds: its age, whatever the clock says. */
  takenRunS: number;
  version: string;
  config: string;
  gaps: readonly Gap[];
  channels: readonly SnapshotChannel[];
}

export type SnapshotKind = 'alarm' | 'asked' | 'start' | 'coast-down';

/** Version of these names; a reader that meets a higher one reads what it knows. */
const FORMAT = '1';
const UNITS: readonly SampleUnit[] = ['g', 'm/s2', 'logic'];
const KINDS: readonly SnapshotKind[] = ['alarm', 'asked', 'start', 'coast-down'];
const SOURCES: readonly RateUsed['source'][] = ['nominal', 'measured', 'given'];

export function commentsOf(tags: SnapshotTags): string[] {
  const lines: [string, string | number | null][] = [
    ['FOREBAY_SNAPSHOT', FORMAT],
    ['ID', tags.id],
    ['SITE', tags.site],
    ['MACHINES', tags.machines.join(' ')],
    ['LINK', tags.link],
    ['RATE_CLAIMED_HZ', tags.nominalRateHz],
    ['RATE_HZ', tags.rate.hz],
    ['RATE_SOURCE', tags.rate.source],
    ['RATE_PPM', tags.rate.ppm],
    ['START', tags.start],
    ['START_CLOCK', tags.clock],
    ['FIRST_INDEX', tags.firstIndex],
    ['NODE_SERIAL', tags.nodeSerial],
    ['SHAFTS', tags.shafts.map(({ machine, hz, source }) => `${machine}:${hz}:${source}`).join(' ')],
    ['CAUSE', tags.cause],
    ['KIND', tags.kind],
    ['ALARMS', tags.alarms.join(' ')],
    ['TAKEN_RUN_S', tags.takenRunS],
    ['AGENT_VERSION', tags.version],
    ['CONFIG', tags.config],
    ['GAPS', tags.gaps.map(({ at, samples }) => `${at}+${samples}`).join(' ')],
  ];
  tags.channels.forEach((channel, index) => {
    const n = index + 1;
    lines.push(
      [`CHANNEL_${n}`, channel.name],
      [`POINTS_${n}`, channel.points.join(' ')],
      [`UNIT_${n}`, channel.unit],
      [`UNITS_PER_COUNT_${n}`, channel.unitsPerCount],
      [`COUNT_RANGE_${n}`, channel.countRange && `${channel.countRange[0]}..${channel.countRange[1]}`],
    );
  });
  return lines.flatMap(([name, value]) =>
    value === null || value === '' ? [] : [`${name}=${oneLine(value)}`],
  );
}

/** Tag readers show a comment as a line. */
function oneLine(value: string | number): string {
  return String(value).replace(/\s+/g, ' ');
}

/** null: the comments are not those of a snapshot. @throws RangeError naming the comment that is missing or wrong. */
export function tagsOf(comments: Comments, channels: number): SnapshotTags | null {
  if (!comments.has('FOREBAY_SNAPSHOT')) return null;
  const text = (name: string) => {
    const value = comments.get(name);
    if (value === undefined) throw new RangeError(`comment ${name} is missing`);
    return value;
  };
  const words = (name: string) => (comments.get(name) ?? '').split(' ').filter((word) => word !== '');
  const number = (name: string, holds: (value: number) => boolean) => {
    const value = Number(text(name));
    if (!holds(value)) throw new RangeError(`comment ${name}=${text(name)} is not possible`);
    return value;
  };
  const oneOf = <T extends string>(name: string, allowed: readonly T[]): T => {
    const found = allowed.find((value) => value === text(name));
    if (found === undefined)
      throw new RangeError(`comment ${name}=${text(name)} is none of ${allowed.join(', ')}`);
    return found;
  };
  const positive = (value: number) => Number.isFinite(value) && value > 0;
  const start = text('START');
  if (Number.isNaN(Date.parse(start))) throw new RangeError(`comment START=${start} is no time`);
  return {
    id: text('ID'),
    site: text('SITE'),
    machines: words('MACHINES'),
    link: text('LINK'),
    nominalRateHz: number('RATE_CLAIMED_HZ', positive),
    rate: {
      hz: number('RATE_HZ', positive),
      source: oneOf('RATE_SOURCE', SOURCES),
      ppm: comments.has('RATE_PPM') ? number('RATE_PPM', (value) => value >= 0) : null,
    },
    start,
    clock: oneOf('START_CLOCK', ['synchronised', 'free']),
    firstIndex: number('FIRST_INDEX', (value) => Number.isSafeInteger(value) && value >= 0),
    nodeSerial: comments.get('NODE_SERIAL') ?? null,
    shafts: words('SHAFTS').map(shaftOf),
    cause: comments.get('CAUSE') ?? '',
    kind: oneOf('KIND', KINDS),
    alarms: words('ALARMS'),
    takenRunS: number('TAKEN_RUN_S', (value) => Number.isFinite(value) && value >= 0),
    version: text('AGENT_VERSION'),
    config: text('CONFIG'),
    gaps: words('GAPS').map(gapOf),
    channels: Array.from({ length: channels }, (_, index) => {
      const n = index + 1;
      return {
        name: text(`CHANNEL_${n}`),
        points: words(`POINTS_${n}`),
        unit: oneOf(`UNIT_${n}`, UNITS),
        unitsPerCount: number(`UNITS_PER_COUNT_${n}`, (value) => Number.isFinite(value) && value !== 0),
        countRange: rangeOf(comments.get(`COUNT_RANGE_${n}`)),
      };
    }),
  };
}

function shaftOf(word: string): ShaftTag {
  const [machine = '', hz = '', source = ''] = word.split(':');
  if (!(Number(hz) >= 0)) throw new RangeError(`comment SHAFTS holds ${word}, which is no speed`);
  return { machine, hz: Number(hz), source };
}

function gapOf(word: string): Gap {
  const found = /^(\d+)\+(\d+)$/.exec(word);
  if (!found) throw new RangeError(`comment GAPS holds ${word}, which is no stretch`);
  return { at: Number(found[1]), samples: Number(found[2]) };
}

function rangeOf(text: string | undefined): [number, number] | null {
  if (text === undefined) return null;
  const found = /^(-?\d+)\.\.(-?\d+)$/.exec(text);
  if (!found) throw new RangeError(`comment COUNT_RANGE ${text} is no range`);
  return [Number(found[1]), Number(found[2])];
}
