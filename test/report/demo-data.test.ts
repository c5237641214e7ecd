/** The recordings of demo-data/: made from seeds, and found to be what they were made as. */
import { execFileSync } from 'node:child_process';
import { readdirSync, readFileSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { afterAll, describe, expect, it } from 'vitest';
import { loadStation } from '../../src/config/load.ts';
import { demoRecordings } from '../../src/simulate/recordings.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { demoData, demoStation, inFolder, type Line, removeFolder, replayLines } from './rig.ts';

afterAll(removeFolder);

const script = fileURLToPath(new URL('../../scripts/make-demo-data.mjs', import.meta.url));
const ids = demoRecordings().map(({ id }) => id);
const flacOf = (id: string) => join(demoData, `${id}.flac`);
const readme = readFileSync(join(demoData, 'README.md'), 'utf8');

describe('the demo data', () => {
  it('is one recording a state, under 8 MB in all, each in the README, which says that it is invented', () => {
    const there = readdirSync(demoData).filter((name) => name.endsWith('.flac'));
    expect(there.sort()).toEqual(ids.map((id) => `${id}.flac`).sort());
    expect(there.reduce((sum, name) => sum + statSync(join(demoData, name)).size, 0)).toBeLessThan(8e6);
    for (const id of ids) expect(readme).toContain(`\`${id}.flac\``);
    expect(readme).toMatch(/invented/i);
  });

  it.each(['outer', 'coast-down'])('is made again bit for bit: %s', (id) => {
    execFileSync(process.execPath, [script, inFolder('made'), id], { stdio: 'pipe' });
    expect(readFileSync(join(inFolder('made'), `${id}.flac`)).equals(readFileSync(flacOf(id)))).toBe(true);
  });

  it('says of itself that nothing was measured, and what its scale, rate and points are', () => {
    for (const id of ids) {
      const recording = openRecording(flacOf(id));
      expect(recording.tags?.cause, id).toContain('nothing was measured');
      expect(recording.tags?.config).toBe(loadStation(demoStation).configHash);
      expect(recording.tags?.channels.map(({ points }) => points[0])).toEqual(
        ['h', 'v', 'a'].map((name) => `pump-3/motor-de-${name}`),
      );
      recording.close();
    }
  });

  // What the simulator put in is what the agent's code must find; resonance and cavitation have no rule, so nothing is
  // accused there, and the velocity alone tells.
  it.each([
    ['healthy', []],
    ['unbalance', ['unbalance']],
    ['misalignment', ['misalignment']],
    ['looseness', ['looseness']],
    ['resonance', []],
    ['electrical', ['electrical']],
    ['outer', ['bearing-outer']],
    ['inner', ['bearing-inner']],
    ['roller', ['bearing-rolling-element']],
    ['cage', ['bearing-cage']],
    ['cavitation', []],
    ['coast-down', []],
  ])('of %s gives the findings %j', async (id, faults) => {
    const lines = await replayLines(flacOf(id));
    const findings = lines.filter(({ kind }) => kind === 'finding');
    const last = findings.at(-1) as (Line & { findings: { fault: string }[] }) | undefined;
    expect((last?.findings ?? []).map(({ fault }) => fault)).toEqual(faults);
    expect(lines.filter(({ kind }) => kind === 'reading').length).toBeGreaterThan(8);
  });

  it('shows in its figures what its README says beside the findings', async () => {
    const last = async (id: string) => {
      const lines = await replayLines(flacOf(id));
      return lines.filter(({ kind, point }) => kind === 'reading' && point === 'motor-de-h').at(-1)!;
    };
    const [healthy, resonance, cavitation] = [
      await last('healthy'),
      await last('resonance'),
      await last('cavitation'),
    ];
    expect(healthy.zone).toBe('A');
    expect(resonance.zone).toBe('D');
    const { vane_pass } = resonance.tones as { vane_pass: { mm_s: number } };
    expect(vane_pass.mm_s / (resonance.velocity as { overall: number }).overall).toBeGreaterThan(0.9);
    const rms = (line: Line) => (line.acceleration as { rms: number }).rms;
    expect(rms(cavitation) / rms(healthy)).toBeGreaterThan(3);
  });
});
