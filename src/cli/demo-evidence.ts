/** The end of the demo: the waveform behind the alarm, pulled over the broker as from afar, and its report. */

import { mkdirSync, statSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { pullCommand } from './pull.ts';
import { reportCommand } from './report.ts';

export interface EvidenceWanted {
  readonly brokerPort: number;
  readonly site: string;
  /** As the alarm names it. */
  readonly snapshot: string;
  readonly stationFile: string;
  readonly version: string;
}

export interface DemoEvidence {
  /** For a person. */
  readonly lines: readonly string[];
  /** null: all of it came. */
  readonly trouble: string | null;
}

/** Kept after the demo, and written over by the next one. */
const folder = join(tmpdir(), 'forebay-demo-report');

/** Lines for a person. @throws ForebayError where the station does not give the snapshot or it cannot be reported. */
export async function pullEvidence(wanted: EvidenceWanted): Promise<string[]> {
  mkdirSync(folder, { recursive: true });
  const flac = join(folder, 'alarm.flac');
  const page = join(folder, 'alarm.html');
  const quiet = { write: () => true };
  const began = performance.now();
  await pullCommand({
    broker: `mqtt://127.0.0.1:${wanted.brokerPort}`,
    site: wanted.site,
    snapshot: wanted.snapshot,
    point: null,
    seconds: null,
    fromS: null,
    channels: null,
    file: flac,
    force: true,
    username: null,
    passwordFile: null,
    caFile: null,
    certFile: null,
    keyFile: null,
    protocol: 4,
    err: quiet,
  });
  const pulledS = (performance.now() - began) / 1000;
  await reportCommand(
    { file: flac, config: wanted.stationFile, out: page, force: true, version: wanted.version },
    quiet,
  );
  return [
    `  ${wanted.snapshot}: ${megabytes(flac)} MB of FLAC pulled over the broker in ${pulledS.toFixed(1)} s, its hash verified`,
    `  ${flac}`,
    `  ${page} (${megabytes(page)} MB): open it in a browser`,
  ];
}

function megabytes(path: string): string {
  return (statSync(path).size / 1e6).toFixed(2);
}
