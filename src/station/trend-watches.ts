import type { Station } from '../config/station.ts';

/** What is kept a trend of at every point, beside what the rules watch. */
const always = [
  'velocity.overall',
  'displacement.rms',
  'acceleration.rms',
  'acceleration.kurtosis',
  'envelope.mean',
];

export function trendWatches(station: Station): string[] {
  const watched = station.rules
    .filter(({ test }) => test.kind !== 'is' && test.kind !== 'sensor')
    .map(({ watch }) => watch);
  return [...new Set([...always, ...watched])];
}
