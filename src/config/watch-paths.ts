/** The figures of a reading that a rule may watch. */

import { defectNames } from './schema.ts';

export type WatchKind =
  | { readonly kind: 'number' }
  | { readonly kind: 'text'; readonly values: readonly string[] };

const number: WatchKind = { kind: 'number' };

const fixed = new Map<string, WatchKind>([
  ['quality', { kind: 'text', values: ['good', 'uncertain', 'bad'] }],
  ['zone', { kind: 'text', values: ['A', 'B', 'C', 'D'] }],
  ['envelope.defect', { kind: 'text', values: defectNames }],
  ...[
    'velocity.overall',
    'displacement.rms',
    'displacement.p2p',
    'acceleration.rms',
    'acceleration.peak',
    'acceleration.crest',
    'acceleration.kurtosis',
    'acceleration.mean_hz',
    'tones.vane_pass.mm_s',
    'tones.twice_mains.mm_s',
    'envelope.mean',
    'envelope.floor',
    'shaft.hz',
    'rate.hz',
    ...['1', '2', '3'].flatMap((order) => [`orders.${order}.mm_s`, `orders.${order}.deg`]),
    ...['bpfo', 'bpfi', 'bsf', 'ftf'].flatMap((line) =>
      ['hz', 'line', 'over_floor_db', 'modulation', 'harmonics'].map(
        (figure) => `envelope.${line}.${figure}`,
      ),
    ),
  ].map((path): [string, WatchKind] => [path, number]),
]);

/** What a path stands for at a point with these velocity bands; undefined: nothing. */
export function watchKind(path: string, bandIds: ReadonlySet<string>): WatchKind | undefined {
  const band = path.startsWith('velocity.') ? path.slice('velocity.'.length) : null;
  return fixed.get(path) ?? (band !== null && bandIds.has(band) ? number : undefined);
}

export function watchPaths(bandIds: ReadonlySet<string>): string[] {
  return [...fixed.keys(), ...[...bandIds].map((id) => `velocity.${id}`)];
}
