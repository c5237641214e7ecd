/**
 * A snapshot as comma-separated values: a line a sample, time in seconds from the first, values in the unit that the
 * heading names. Values are printed so that dividing by the units per count gives the count again; samples that never
 * came are empty.
 */

import type { Recording } from './recording.ts';
import type { Gap, SnapshotTags } from './tags.ts';

const BLOCK_FRAMES = 8192;
/** A nanosecond. */
const TIME_DECIMALS = 9;

export function* csvChunks(recording: Recording, tags: SnapshotTags): Generator<string, void, void> {
  const names = tags.channels.map(({ name, points, unit }) => `${points[0] ?? name} [${unit}]`);
  yield `${['time [s]', ...names].map(quoted).join(',')}\n`;
  const empty = ','.repeat(tags.channels.length);
  for (let at = 0; at < recording.frames; at += BLOCK_FRAMES) {
    const counts = recording.read(at, Math.min(BLOCK_FRAMES, recording.frames - at));
    const length = counts[0]!.length;
    const lines: string[] = [];
    for (let i = 0; i < length; i++) {
      const time = ((at + i) / tags.rate.hz).toFixed(TIME_DECIMALS);
      if (isMissing(tags.gaps, at + i)) lines.push(`${time}${empty}`);
      else
        lines.push(
          `${time},${counts.map((channel, c) => channel[i]! * tags.channels[c]!.unitsPerCount).join(',')}`,
        );
    }
    yield `${lines.join('\n')}\n`;
  }
}

function isMissing(gaps: readonly Gap[], sample: number): boolean {
  return gaps.some(({ at, samples }) => sample >= at && sample < at + samples);
}

/** RFC 4180, 2: a field that holds a comma or a quote is enclosed in quotes. */
function quoted(field: string): string {
  return /[",\n]/.test(field) ? `"${field.replaceAll('"', '""')}"` : field;
}
