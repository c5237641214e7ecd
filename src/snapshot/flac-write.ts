/** Writes snapshots: encoded, and in place only when they are whole and on the disk. */

import { closeSync, fsyncSync, openSync, renameSync, unlinkSync, writeFileSync } from 'node:fs';
import { basename, dirname, join } from 'node:path';
import { bitsFor, encodeFlac } from './flac-encode.ts';
import type { CutJob, WriteJob } from './flac-job.ts';
import { openRecording } from './recording.ts';
import { commentsOf, type SnapshotTags } from './tags.ts';

/** What a file is called while it is written; whatever is found under such a name is half a file. */
export const WRITING = '.writing-';

export async function writeSnapshot({ path, counts, tags }: Omit<WriteJob, 'kind'>): Promise<void> {
  const bitsPerSample = bitsFor(counts);
  if (bitsPerSample === null) throw new RangeError('a snapshot holds counts of at most 24 bits');
  const bytes = await encodeFlac({
    counts,
    bitsPerSample,
    rateHz: tags.nominalRateHz,
    comments: commentsOf(tags),
  });
  const unfinished = join(dirname(path), `${WRITING}${basename(path)}`);
  try {
    const fd = openSync(unfinished, 'w');
    try {
      writeFileSync(fd, bytes);
      fsyncSync(fd);
    } finally {
      closeSync(fd);
    }
    renameSync(unfinished, path);
  } catch (error) {
    removeIfThere(unfinished);
    throw error;
  }
  syncFolder(dirname(path));
}

/** @throws RangeError naming the channel that is not there, or the end of the snapshot. */
export async function writeCut({
  from,
  path,
  channels,
  fromS,
  seconds,
}: Omit<CutJob, 'kind'>): Promise<void> {
  const recording = openRecording(from);
  const { tags, frames } = recording;
  if (tags === null) throw new RangeError('it is no snapshot');
  const picked = tags.channels.flatMap(({ name, points }, index) =>
    channels === null || channels.includes(name) || points.some((point) => channels.includes(point))
      ? [index]
      : [],
  );
  if (picked.length === 0)
    throw new RangeError(`it has the channels ${tags.channels.map(({ name }) => name).join(', ')}`);
  const first = Math.round(fromS * tags.rate.hz);
  const end = seconds === null ? frames : Math.min(frames, first + Math.round(seconds * tags.rate.hz));
  if (first >= frames || end <= first)
    throw new RangeError(`it is ${(frames / tags.rate.hz).toFixed(3)} s long`);
  const counts = recording.read(first, end - first);
  await writeSnapshot({
    path,
    counts: picked.map((index) => counts[index]!),
    tags: cutTags(tags, picked, first, end),
  });
}

function cutTags(tags: SnapshotTags, picked: readonly number[], first: number, end: number): SnapshotTags {
  return {
    ...tags,
    firstIndex: tags.firstIndex + first,
    start: new Date(Date.parse(tags.start) + (first / tags.rate.hz) * 1000).toISOString(),
    channels: picked.map((index) => tags.channels[index]!),
    gaps: tags.gaps.flatMap(({ at, samples }) => {
      const from = Math.max(at, first);
      const to = Math.min(at + samples, end);
      return to > from ? [{ at: from - first, samples: to - from }] : [];
    }),
  };
}

function removeIfThere(path: string): void {
  try {
    unlinkSync(path);
  } catch {
    // It is not.
  }
}

/** The new name is on the disk as well. */
function syncFolder(folder: string): void {
  const fd = openSync(folder, 'r');
  try {
    fsyncSync(fd);
  } finally {
    closeSync(fd);
  }
}
