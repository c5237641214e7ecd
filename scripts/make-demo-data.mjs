// Makes the recordings of demo-data/ from their seeds, bit for bit the same each time; needs a build.
// `node scripts/make-demo-data.mjs [FOLDER] [ID ...]`: into another folder, or only some of them.
import { mkdirSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));
const load = (module) => import(new URL(`../dist/${module}`, import.meta.url).href);
const { demoRecordings, renderRecording } = await load('simulate/recordings.js');
const { loadStation } = await load('config/load.js');
const { writeSnapshot } = await load('snapshot/flac-write.js');

const [folder = join(root, 'demo-data'), ...wanted] = process.argv.slice(2);
const station = loadStation(join(root, 'demo-data/station.yaml'));
const [machine] = station.machines;
const [link] = station.links;
/** An invented evening, the recordings a quarter of an hour apart. */
const firstStart = Date.UTC(2026, 2, 2, 18, 0, 0);
const apartS = 900;

function tagsFor(recording, channels, position) {
  const start = new Date(firstStart + 1000 * apartS * position).toISOString();
  return {
    id: `demo-${recording.id}`,
    site: station.site.id,
    machines: [machine.id],
    link: link.id,
    nominalRateHz: recording.rateHz,
    rate: { hz: recording.rateHz, source: 'nominal', ppm: null },
    start,
    clock: 'synchronised',
    firstIndex: 0,
    nodeSerial: 'INVENTED-1',
    shafts: [],
    cause: `demo data, nothing was measured: ${recording.text}`,
    kind: recording.id === 'coast-down' ? 'coast-down' : 'asked',
    alarms: [],
    takenRunS: apartS * position,
    version: 'simulator',
    config: station.configHash,
    gaps: [],
    channels: channels.map(({ name, unit, unitsPerCount }) => ({
      name,
      points: machine.points.filter((point) => point.channel === name).map((point) => point.key),
      unit,
      unitsPerCount,
      countRange: [-32_768, 32_767],
    })),
  };
}

const recordings = demoRecordings();
const unknown = wanted.filter((id) => !recordings.some((recording) => recording.id === id));
if (unknown.length > 0) {
  console.error(`no recording ${unknown.join(', ')}; there are ${recordings.map(({ id }) => id).join(', ')}`);
  process.exit(2);
}
mkdirSync(folder, { recursive: true });
for (const [position, recording] of recordings.entries()) {
  if (wanted.length > 0 && !wanted.includes(recording.id)) continue;
  const { channels, counts } = renderRecording(recording);
  const width = channels.length;
  const apart = channels.map((_, c) =>
    Int32Array.from({ length: counts.length / width }, (_, i) => counts[i * width + c]),
  );
  const path = join(folder, `${recording.id}.flac`);
  await writeSnapshot({ path, counts: apart, tags: tagsFor(recording, channels, position) });
  console.log(`${path} ${(statSync(path).size / 1000).toFixed(0)} kB`);
}
