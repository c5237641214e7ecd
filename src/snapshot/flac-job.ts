/** What passes to and from the FLAC worker. */

import type { SnapshotTags } from './tags.ts';

export interface WriteJob {
  kind: 'write';
  path: string;
  counts: Int32Array[];
  tags: SnapshotTags;
}

/** Some channels, or a stretch, of a snapshot that is there, as a file of its own. */
export interface CutJob {
  kind: 'cut';
  from: string;
  path: string;
  /** null: all of them. */
  channels: readonly string[] | null;
  fromS: number;
  /** null: to the end. */
  seconds: number | null;
}

export type FlacJob = WriteJob | CutJob;

export type FlacOutcome = { ok: true } | { ok: false; error: string };
