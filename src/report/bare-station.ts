/** A station made up from the tags of a snapshot, for a report without a station file: default settings, no bearings. */

import { ForebayError } from '../config/errors.ts';
import { parseStation } from '../config/load.ts';
import type { Station } from '../config/station.ts';
import type { SnapshotTags } from '../snapshot/tags.ts';

/** @throws ForebayError where the tags name nothing that could be measured, or hold names that no station can have. */
export function bareStation(tags: SnapshotTags, file: string): Station {
  const points = tags.channels.flatMap((channel) => {
    const key = channel.points[0];
    return key === undefined || channel.unit === 'logic' ? [] : [{ key, channel: channel.name }];
  });
  const machines = [...new Set(points.map(({ key }) => machineOf(key)))].map((id) => {
    const told = tags.shafts.find((shaft) => shaft.machine === id && shaft.hz > 0);
    return {
      id,
      ...(told === undefined ? {} : { shaft: { rpm: 60 * told.hz } }),
      points: points
        .filter(({ key }) => machineOf(key) === id)
        .map(({ key, channel }) => ({ id: key.slice(id.length + 1), link: tags.link, channel })),
    };
  });
  // JSON is YAML: the file's own checks and defaults make the station.
  const text = JSON.stringify({
    site: { id: tags.site },
    links: [{ id: tags.link, serial: { path: '/dev/null' } }],
    machines,
  });
  const result = parseStation(text, { file, baseDir: '/' });
  if ('errors' in result) {
    throw new ForebayError(
      'recording.malformed',
      `${file}: its tags make no station (${result.errors[0]?.message}); give the station file with -c`,
    );
  }
  return result.station;
}

function machineOf(key: string): string {
  const slash = key.indexOf('/');
  return slash < 0 ? key : key.slice(0, slash);
}
