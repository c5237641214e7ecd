import { existsSync, mkdirSync, mkdtempSync, readdirSync, rmSync, statSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, describe, expect, it } from 'vitest';
import { writeCut, writeSnapshot } from '../../src/snapshot/flac-write.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { newestRunS, Shelf, type ShelfLimits } from '../../src/snapshot/shelf.ts';
import type { SnapshotTags } from '../../src/snapshot/tags.ts';
import { someTags } from '../support/tagged.ts';

const daysS = 86_400;
const folders: string[] = [];
afterEach(() => {
  for (const folder of folders.splice(0)) rmSync(folder, { recursive: true, force: true });
});

function rig(limits: Partial<ShelfLimits> = {}) {
  const folder = mkdtempSync(join(tmpdir(), 'forebay-shelf-'));
  folders.push(folder);
  const needed = new Set<string>();
  const now = { runS: 0 };
  const host = { runS: () => now.runS, needed: (id: string) => needed.has(id) };
  const all = { number: 100, bytes: 1e9, ageS: 1e9, ...limits };
  const open = () => new Shelf(folder, all, host);
  const put = async (shelf: Shelf, id: string, changes: Partial<SnapshotTags> = {}) => {
    const counts = someTags.channels.map(() => new Int32Array(500).fill(id.length));
    const tags = { ...someTags, id, takenRunS: now.runS, ...changes };
    await writeSnapshot({ path: shelf.pathOf(id), counts, tags });
    return shelf.add(id);
  };
  return { folder, needed, now, open, put };
}

const ids = (shelf: Shelf) => shelf.all.map(({ id }) => id);

describe('the shelf of snapshots', () => {
  it('finds what is there again, and removes what was only half written', async () => {
    const { folder, open, put } = rig();
    const shelf = open();
    await put(shelf, 'a');
    expect(readdirSync(folder)).toEqual(['a.flac']);
    writeFileSync(join(folder, '.writing-b.flac'), 'half of it');
    writeFileSync(join(folder, 'c.flac'), 'fLaC');
    writeFileSync(join(folder, 'notes.txt'), 'mine');
    const again = open();
    expect(ids(again)).toEqual(['a']);
    expect(again.get('a')).toEqual(shelf.get('a'));
    expect(again.cleaned).toBe(2);
    expect(readdirSync(folder).sort()).toEqual(['a.flac', 'notes.txt']);
  });

  it('removes nothing that it cannot read', async () => {
    const { folder, open, put } = rig();
    await put(open(), 'a');
    // Opens, and gives an error of the system when it is read.
    mkdirSync(join(folder, 'b.flac'));
    const shelf = open();
    expect(ids(shelf)).toEqual(['a']);
    expect(shelf.cleaned).toBe(0);
    expect(readdirSync(folder).sort()).toEqual(['a.flac', 'b.flac']);
  });

  it('is bounded in number: the oldest goes first, those of unacknowledged alarms last', async () => {
    const { needed, now, open, put } = rig({ number: 3 });
    const shelf = open();
    needed.add('a');
    for (const id of ['a', 'b', 'c', 'd', 'e']) {
      now.runS += 10;
      await put(shelf, id);
    }
    expect(ids(shelf)).toEqual(['a', 'd', 'e']);
    expect(shelf.dropped).toBe(2);
    for (const id of ['d', 'e']) needed.add(id);
    now.runS += 10;
    needed.add('f');
    await put(shelf, 'f');
    // All are needed: then the oldest goes all the same.
    expect(ids(shelf)).toEqual(['d', 'e', 'f']);
    expect(existsSync(shelf.pathOf('a'))).toBe(false);
  });

  it('is bounded in bytes and in age', async () => {
    const { now, open, put } = rig({ ageS: 100 });
    const shelf = open();
    const { bytes } = await put(shelf, 'a');
    now.runS = 101;
    shelf.tidy();
    expect(ids(shelf)).toEqual([]);
    const small = rig({ bytes: 2.5 * bytes });
    const tight = small.open();
    for (const id of ['a', 'b', 'c']) {
      small.now.runS += 1;
      await small.put(tight, id);
    }
    expect(ids(tight)).toEqual(['b', 'c']);
    expect(tight.bytes).toBe(statSync(tight.pathOf('b')).size + statSync(tight.pathOf('c')).size);
  });

  it('keeps the last three starts of a machine and the last of each week, coast-downs by themselves', async () => {
    const { now, open, put } = rig();
    const shelf = open();
    for (let day = 0; day < 20; day++) {
      now.runS = day * daysS;
      await put(shelf, `s${day}`, { kind: 'start' });
      if (day === 3) await put(shelf, 'stop', { kind: 'coast-down' });
      if (day === 4) await put(shelf, 'other', { kind: 'start', machines: ['pump-2'] });
    }
    // Weeks of run time end with days 6 and 13.
    expect(ids(shelf)).toEqual(['stop', 'other', 's6', 's13', 's17', 's18', 's19']);
  });

  it('counts the starts of each machine on each node, and keeps those of unacknowledged alarms beside', async () => {
    const { needed, now, open, put } = rig();
    const shelf = open();
    needed.add('a0');
    for (let k = 0; k < 5; k++) {
      for (const [id, link, cause] of [
        ['a', 'node-1', 'start of pump-1'],
        ['b', 'node-2', 'start of pump-1'],
        ['c', 'node-2', 'start of pump-2'],
      ] as const) {
        now.runS += 10;
        await put(shelf, `${id}${k}`, { kind: 'start', machines: ['pump-1', 'pump-2'], link, cause });
      }
    }
    expect(ids(shelf)).toEqual(['a0', 'a2', 'b2', 'c2', 'a3', 'b3', 'c3', 'a4', 'b4', 'c4']);
  });

  it('never gives up the one that was just added, whatever the others are', async () => {
    const { needed, now, open, put } = rig({ number: 3 });
    // Taken under a database that has gone, whose run time was far ahead.
    now.runS = 1e6;
    const before = open();
    for (const id of ['a', 'b', 'c']) {
      needed.add(id);
      now.runS += 10;
      await put(before, id);
    }
    now.runS = 10;
    const shelf = open();
    const asked = await put(shelf, 'd', { kind: 'asked' });
    expect(existsSync(asked.path)).toBe(true);
    expect(ids(shelf)).toEqual(['d', 'b', 'c']);
  });

  it('refuses one that is more than all may take, and gives up none for it', async () => {
    const probe = rig();
    const { bytes } = await probe.put(probe.open(), 'a');
    const { folder, open, put } = rig({ bytes: 1.5 * bytes });
    const shelf = open();
    await put(shelf, 'a');
    const alarms = Array.from({ length: 500 }, (_, n) => `pump-1/h.rule-${n}`);
    await expect(put(shelf, 'big', { alarms })).rejects.toThrow(/it takes .* MB, all together may take/);
    expect(ids(shelf)).toEqual(['a']);
    expect(readdirSync(folder)).toEqual(['a.flac']);
  });

  it('knows the newest run time that it has seen, without changing anything', async () => {
    const { folder, now, open, put } = rig();
    expect(newestRunS(join(folder, 'not-there'))).toBe(0);
    expect(newestRunS(folder)).toBe(0);
    const shelf = open();
    for (const runS of [5000, 9000, 7000]) {
      now.runS = runS;
      await put(shelf, `s${runS}`);
    }
    writeFileSync(join(folder, '.writing-b.flac'), 'half of it');
    writeFileSync(join(folder, 'c.flac'), 'fLaC');
    expect(newestRunS(folder)).toBe(9000);
    expect(readdirSync(folder)).toHaveLength(5);
  });
});

describe('a cut of a snapshot', () => {
  it('holds the channels and the stretch that were asked for, with tags that fit', async () => {
    const { folder, open, put } = rig();
    const { path } = await put(open(), 'a');
    const rateHz = someTags.rate.hz;
    const cut = join(folder, 'cut');
    await writeCut({
      from: path,
      path: cut,
      channels: ['pump-1/foot', 'tach'],
      fromS: 103 / rateHz,
      seconds: 200 / rateHz,
    });
    const recording = openRecording(cut);
    expect(recording).toMatchObject({ channels: 2, frames: 200 });
    expect(recording.tags).toMatchObject({
      firstIndex: someTags.firstIndex + 103,
      gaps: [{ at: 0, samples: 4 }],
      channels: [someTags.channels[1], someTags.channels[2]],
    });
    expect(Date.parse(recording.tags!.start) - Date.parse(someTags.start)).toBe(2);
    const refused = { from: path, path: cut, channels: null, fromS: 1, seconds: 1 };
    await expect(writeCut(refused)).rejects.toThrow(/0\.012 s long/);
    await expect(writeCut({ ...refused, fromS: 0, channels: ['z'] })).rejects.toThrow(/channels h, v, tach/);
  });

  it('is refused where a count needs more than 24 bits, and leaves nothing behind', async () => {
    const { folder } = rig();
    const counts = someTags.channels.map(() => Int32Array.of(2 ** 23));
    const path = join(folder, 'wide.flac');
    await expect(writeSnapshot({ path, counts, tags: someTags })).rejects.toThrow(/24 bits/);
    expect(readdirSync(folder)).toEqual([]);
  });
});
