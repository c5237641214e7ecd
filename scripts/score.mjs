// Replays a folder of recordings with known faults through `forebay replay` and says how often the verdict is right.
//
//   node scripts/score.mjs [folder=../shared/data] [--json]
//
// The folder holds, in subfolders, pairs of <name>.i16 (little-endian int16, one channel) and <name>.json (rate, scale,
// speed, the faulty bearing's multiples, `other_bearing` that was healthy, the fault), and may hold reference.json.
// One set of defaults for all. The speed is set as an installer would: the rpm of the rig within 3 %, which spans an
// induction motor from no load to full load; the product finds the speed in the record. A recording's verdict is the
// value of `envelope.defect` most frequent among its readings at --every 2, null included.
import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';

const root = fileURLToPath(new URL('..', import.meta.url));
const [folder = join(root, '../shared/data')] = process.argv.slice(2).filter((arg) => !arg.startsWith('--'));
const asJson = process.argv.includes('--json');
const { replayCommand } = await import(join(root, 'dist/cli/replay.js'));
const { loadStation } = await import(join(root, 'dist/config/load.js'));
const { planPoint } = await import(join(root, 'dist/measure/plan.js'));
const { measureRecord } = await import(join(root, 'dist/measure/measure.js'));

const truths = { outer: 'outer', inner: 'inner', ball: 'rolling-element', normal: null };
const work = mkdtempSync(join(tmpdir(), 'forebay-score-'));

/** 16-bit WAV of one channel. */
function writeWav(path, samples, rateHz) {
  const head = Buffer.alloc(44);
  head.write('RIFF', 0);
  head.writeUInt32LE(36 + samples.length, 4);
  head.write('WAVEfmt ', 8);
  head.writeUInt32LE(16, 16);
  head.writeUInt16LE(1, 20);
  head.writeUInt16LE(1, 22);
  head.writeUInt32LE(rateHz, 24);
  head.writeUInt32LE(2 * rateHz, 28);
  head.writeUInt16LE(2, 32);
  head.writeUInt16LE(16, 34);
  head.write('data', 36);
  head.writeUInt32LE(samples.length, 40);
  writeFileSync(path, Buffer.concat([head, samples]));
}

/** The rigs are small and shake far less than a pump, so they count as running from 0.01 mm/s. */
function stationYaml({ sample_rate_hz, rpm }, bearing) {
  const { ftf, bsf, bpfo, bpfi } = bearing.multiples;
  return `site: {id: score, name: Score, mains_hz: 60}
broker: {embedded: {port: 1883}}
links:
  - {id: node, serial: {path: /dev/null, baud: 115200}, format: frames, expect: {sample_rate_hz: ${sample_rate_hz}, channels: [x]}}
machines:
  - id: rig
    name: Rig
    mounting: horizontal
    shaft: {rpm: ${rpm}, tolerance_pct: 3}
    running: {above_mm_s: 0.01}
    bearings: [{id: judged, multiples: {ftf: ${ftf}, bsf: ${bsf}, bpfo: ${bpfo}, bpfi: ${bpfi}}}]
    points: [{id: p, link: node, channel: x, direction: horizontal, part: motor, at: bearing, bearing: judged}]
`;
}

async function readingsOf(record, yaml, everyS) {
  const config = join(work, 'station.yaml');
  writeFileSync(config, yaml);
  const lines = [];
  const out = { write: (text) => lines.push(JSON.parse(text)) };
  const fullScaleG = record.meta.lsb_g * 32_768;
  const options = { config, points: 'rig/p', fullScaleG, every: everyS, json: true };
  const status = await replayCommand(record.wav, options, out, process.stderr);
  if (status !== 0) throw new Error(`${record.name}: replay ended with ${status}`);
  return lines.filter(({ kind }) => kind === 'reading');
}

function mostFrequent(values) {
  const counts = new Map();
  for (const value of values) counts.set(value, (counts.get(value) ?? 0) + 1);
  return [...counts].sort((a, b) => b[1] - a[1])[0]?.[0] ?? null;
}

async function verdict(record, bearing) {
  const readings = await readingsOf(record, stationYaml(record.meta, bearing), 2);
  return {
    defect: mostFrequent(readings.map(({ envelope }) => envelope?.defect ?? null)),
    readings: readings.length,
    why: [...new Set(readings.flatMap(({ why }) => why))],
  };
}

/** The whole recording as one record, unrounded, with the default settings. */
function disagreements({ name, meta }, samples, reference) {
  const config = join(work, 'station.yaml');
  writeFileSync(config, stationYaml(meta, meta.bearing));
  const [machine] = loadStation(config).machines;
  const counts = Int32Array.from({ length: samples.length / 2 }, (_, i) => samples.readInt16LE(2 * i));
  const reading = measureRecord(planPoint(machine.points[0], machine, meta.sample_rate_hz, 60), {
    counts,
    firstIndex: 0,
    unit: 'g',
    unitsPerCount: meta.lsb_g,
    countRange: null,
    rate: { hz: meta.sample_rate_hz, source: 'nominal', ppm: null },
    tachometer: null,
    toldShaftHz: null,
    toldRunning: null,
    missingSamples: 0,
    distrust: [],
  });
  const { rms, peak, crest, kurtosis } = reading.acceleration;
  const ours = {
    acc_rms_g: rms,
    acc_peak_g: peak,
    crest_factor: crest,
    kurtosis,
    vel_rms_mm_s: reading.velocity.overall,
  };
  return Object.entries(ours).map(([key, value]) => ({
    key,
    name,
    off: value === null ? null : value / reference.time[key] - 1,
    why: value === null ? reading.why : [],
  }));
}

const records = readdirSync(folder, { recursive: true })
  .map(String)
  .filter((file) => file.endsWith('.json') && existsSync(join(folder, file.replace(/json$/, 'i16'))))
  .sort()
  .map((file) => ({ name: file.slice(0, -5), meta: JSON.parse(readFileSync(join(folder, file), 'utf8')) }));
const referencePath = join(folder, 'reference.json');
const reference = existsSync(referencePath) ? JSON.parse(readFileSync(referencePath, 'utf8')) : {};

const rows = [];
const off = [];
try {
  for (const { name, meta } of records) {
    const record = { name, meta, wav: join(work, 'record.wav') };
    const samples = readFileSync(join(folder, `${name}.i16`));
    writeWav(record.wav, samples, meta.sample_rate_hz);
    const own = await verdict(record, meta.bearing);
    const other = meta.other_bearing ? await verdict(record, meta.other_bearing) : null;
    const truth = truths[meta.fault];
    const isRight = own.defect === truth || (truth === 'rolling-element' && own.defect === 'cage-rate');
    rows.push({
      name,
      fault: meta.fault,
      size: meta.fault_size_in === null ? '-' : `${meta.fault_size_in} in`,
      load: meta.load ?? '-',
      verdict: own.defect,
      outcome: isRight ? 'right' : own.defect === null ? 'missed' : 'wrong',
      readings: own.readings,
      other: other?.defect ?? null,
      hasOther: other !== null,
      why: own.why,
    });
    if (reference[name]) off.push(...disagreements(record, samples, reference[name]));
  }
} finally {
  rmSync(work, { recursive: true });
}

function tally(list) {
  const of = (outcome) => list.filter((row) => row.outcome === outcome).length;
  const healthy = list.filter((row) => row.hasOther);
  return {
    records: list.length,
    right: of('right'),
    wrong: of('wrong'),
    missed: of('missed'),
    false: healthy.filter((row) => row.other !== null).length,
    healthy: healthy.length,
  };
}

const figures = [...new Set(off.map(({ key }) => key))].map((key) => {
  const measured = off
    .filter((o) => o.key === key && o.off !== null)
    .sort((a, b) => Math.abs(b.off) - Math.abs(a.off));
  return {
    figure: key,
    measured: measured.length,
    worst: measured.slice(0, 3).map(({ name, off: by }) => ({ name, off: by })),
  };
});
const notMeasured = off
  .filter(({ off: by, key }) => by === null && key === 'acc_rms_g')
  .map(({ name, why }) => ({ name, why }));
const total = tally(rows);

if (asJson) {
  console.log(JSON.stringify({ total, rows, figures, notMeasured }));
} else {
  for (const row of rows) {
    const other = row.hasOther ? `other: ${row.other ?? '-'}` : '';
    console.log(
      `${row.outcome.padEnd(7)} ${row.name.padEnd(30)} ${row.fault.padEnd(7)} named ${String(row.verdict ?? '-').padEnd(16)} ${row.readings} readings  ${other}`,
    );
    if (row.outcome !== 'right' || row.other) console.log(`        ${row.why.join('; ')}`);
  }
  for (const by of ['fault', 'size', 'load']) {
    console.log(
      `\nby ${by}`.padEnd(21),
      'records    right    wrong   missed    false on the healthy bearing',
    );
    for (const value of [...new Set(rows.map((row) => row[by]))].sort()) {
      const t = tally(rows.filter((row) => row[by] === value));
      const cells = [t.records, t.right, t.wrong, t.missed, `${t.false} of ${t.healthy}`].map((cell) =>
        String(cell).padStart(9),
      );
      console.log(`  ${String(value).padEnd(18)}${cells.join('')}`);
    }
  }
  console.log(
    `\nTOTAL ${total.right} right of ${total.records}, ${total.wrong} wrong, ${total.missed} missed; ${total.false} false of ${total.healthy} on a healthy bearing`,
  );
  for (const { figure, measured, worst } of figures) {
    console.log(
      `${figure.padEnd(14)} against the reference, ${measured} recordings; worst ${worst.map((w) => `${w.off.toExponential(1)} (${w.name})`).join(', ')}`,
    );
  }
  for (const { name, why } of notMeasured) console.log(`not measured: ${name}: ${why.join('; ')}`);
}
