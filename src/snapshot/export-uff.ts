/**
 * A snapshot as a universal file, dataset 58 (function at nodal degree of freedom), in ASCII, a dataset a channel.
 * Records, with the published FORTRAN formats:
 *
 *   1–5  80A1                       identification; 3 is the date, a blank line is written NONE
 *   6    2(I5,I10),2(1X,10A1,I10,I4) function type (1: time response), number, version, load case; response and
 *                                   reference entity, node and direction (0: scalar)
 *   7    3I10,3E13.5                ordinate type (4: real, double precision), points, 1 for even spacing; start,
 *                                   increment, z
 *   8–11 I10,3I5,2(1X,20A1)         abscissa (17: time), ordinate (12: acceleration, 0: unknown), denominator, z
 *   12   4E20.12                    the data
 *
 * An increment of six digits is all that record 7 holds, so the rate stands in full in line 4.
 */

import type { Recording } from './recording.ts';
import type { SnapshotChannel, SnapshotTags } from './tags.ts';

const DELIMITER = '    -1\n';
const MONTHS = ['JAN', 'FEB', 'MAR', 'APR', 'MAY', 'JUN', 'JUL', 'AUG', 'SEP', 'OCT', 'NOV', 'DEC'];
const BLOCK_FRAMES = 8192;
const TIME = 17;
const ACCELERATION = 12;
const UNKNOWN = 0;
const PER_LINE = 4;

export function* uffChunks(recording: Recording, tags: SnapshotTags): Generator<string, void, void> {
  for (const [index, channel] of tags.channels.entries()) {
    yield `${DELIMITER}${'58'.padStart(6)}\n${head(tags, channel, index, recording.frames)}`;
    yield* data(recording, index, channel.unitsPerCount);
    yield DELIMITER;
  }
}

function head(tags: SnapshotTags, channel: SnapshotChannel, index: number, frames: number): string {
  const gaps = tags.gaps.map(({ at, samples }) => `${at}+${samples}`).join(' ');
  const isAcceleration = channel.unit !== 'logic';
  const lines = [
    text(`${channel.points[0] ?? channel.name} ${tags.site} ${tags.id}`),
    text(tags.cause),
    text(date(tags.start)),
    text(`RATE_HZ=${tags.rate.hz} FIRST_INDEX=${tags.firstIndex} START_CLOCK=${tags.clock}`),
    text(gaps === '' ? '' : `MISSING, WRITTEN AS 0: ${gaps}`),
    `${int(1, 5)}${int(index + 1, 10)}${int(0, 5)}${int(0, 10)}${entity(channel.name, index + 1)}${entity('NONE', 0)}`,
    `${int(4, 10)}${int(frames, 10)}${int(1, 10)}${real(0, 13, 5)}${real(1 / tags.rate.hz, 13, 5)}${real(0, 13, 5)}`,
    axis(TIME, 'Time', 's'),
    axis(
      isAcceleration ? ACCELERATION : UNKNOWN,
      isAcceleration ? 'Acceleration' : 'Logic',
      unitLabel(channel),
    ),
    axis(UNKNOWN, 'NONE', 'NONE'),
    axis(UNKNOWN, 'NONE', 'NONE'),
  ];
  return `${lines.join('\n')}\n`;
}

function* data(recording: Recording, index: number, unitsPerCount: number): Generator<string, void, void> {
  for (let at = 0; at < recording.frames; at += BLOCK_FRAMES) {
    const counts = recording.read(at, Math.min(BLOCK_FRAMES, recording.frames - at))[index]!;
    const lines: string[] = [];
    for (let i = 0; i < counts.length; i += PER_LINE) {
      lines.push(
        Array.from(counts.subarray(i, i + PER_LINE), (count) => real(count * unitsPerCount, 20, 12)).join(''),
      );
    }
    yield `${lines.join('\n')}\n`;
  }
}

function unitLabel({ unit }: SnapshotChannel): string {
  return unit === 'logic' ? 'NONE' : unit;
}

function axis(type: number, label: string, units: string): string {
  return `${int(type, 10)}${int(0, 5)}${int(0, 5)}${int(0, 5)} ${label.padEnd(20)} ${units.padEnd(20)}`;
}

function entity(name: string, node: number): string {
  return ` ${ascii(name).slice(0, 10).padEnd(10)}${int(node, 10)}${int(0, 4)}`;
}

function text(line: string): string {
  return ascii(line).slice(0, 80) || 'NONE';
}

function ascii(line: string): string {
  return line.replace(/[^\x20-\x7e]/g, '?');
}

function int(value: number, width: number): string {
  return String(value).padStart(width);
}

/** Ew.d with an exponent of two digits at least. */
function real(value: number, width: number, digits: number): string {
  const [mantissa, exponent = '+0'] = value.toExponential(digits).split('e');
  return `${mantissa}E${exponent[0]}${exponent.slice(1).padStart(2, '0')}`.padStart(width);
}

/** DD-MMM-YY HH:MM:SS, UTC. */
function date(start: string): string {
  const at = new Date(start);
  const two = (value: number) => String(value % 100).padStart(2, '0');
  const day = `${two(at.getUTCDate())}-${MONTHS[at.getUTCMonth()]}-${two(at.getUTCFullYear())}`;
  return `${day} ${two(at.getUTCHours())}:${two(at.getUTCMinutes())}:${two(at.getUTCSeconds())}`;
}
