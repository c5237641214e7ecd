/** `forebay export`: a snapshot for other tools, in physical units, exact to the count. */

import { closeSync, existsSync, openSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { ForebayError } from '../config/errors.ts';
import { csvChunks } from '../snapshot/export-csv.ts';
import { uffChunks } from '../snapshot/export-uff.ts';
import { wavChunks, wavSidecar } from '../snapshot/export-wav.ts';
import { openRecording, type Recording } from '../snapshot/recording.ts';
import type { SnapshotTags } from '../snapshot/tags.ts';

export interface ExportOptions {
  /** The snapshot. */
  from: string;
  to: 'wav' | 'csv' | 'uff';
  /** What is written; of a WAV file, with a `.json` beside it. */
  file: string;
  force: boolean;
  err: { write(text: string): unknown };
}

export async function exportCommand({ from, to, file, force, err }: ExportOptions): Promise<number> {
  const sidecar = to === 'wav' ? `${file}.json` : null;
  for (const path of [file, sidecar]) {
    if (path !== null && !force && existsSync(path))
      throw new ForebayError('file.exists', `${path} is there already`);
  }
  const recording = openRecording(from);
  try {
    const { tags } = recording;
    if (tags === null)
      throw new ForebayError(
        'recording.untagged',
        `${from} does not say what its counts mean: it has no tags`,
      );
    writeWhole(file, chunksOf(recording, tags, to));
    if (sidecar !== null) writeFileSync(sidecar, wavSidecar(tags, recording.bitsPerSample));
    const missing = tags.gaps.reduce((sum, { samples }) => sum + samples, 0);
    if (missing > 0 && to !== 'csv')
      err.write(
        `export: ${missing} samples never came and are written as 0; ${sidecar ?? file} says which\n`,
      );
    return 0;
  } finally {
    recording.close();
  }
}

function chunksOf(
  recording: Recording,
  tags: SnapshotTags,
  to: ExportOptions['to'],
): Generator<Buffer | string, void, void> {
  switch (to) {
    case 'wav':
      return wavChunks(recording);
    case 'csv':
      return csvChunks(recording, tags);
    case 'uff':
      return uffChunks(recording, tags);
  }
}

/** Under its name only when all of it is there. */
function writeWhole(file: string, chunks: Iterable<Buffer | string>): void {
  const unfinished = `${file}.unfinished`;
  try {
    const fd = openSync(unfinished, 'w');
    try {
      for (const chunk of chunks) writeFileSync(fd, chunk);
    } finally {
      closeSync(fd);
    }
    renameSync(unfinished, file);
  } catch (error) {
    rmSync(unfinished, { force: true });
    if (error instanceof ForebayError) throw error;
    throw new ForebayError('file.unwritable', `${file}: ${(error as Error).message}`, { cause: error });
  }
}
