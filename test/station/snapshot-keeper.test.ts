/** What becomes a snapshot, and what does not: the keeper over a real ring and the built FLAC worker. */

import { existsSync, mkdtempSync, readdirSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { setTimeout as sleep } from 'node:timers/promises';
import v8 from 'node:v8';
import vm from 'node:vm';
import { afterEach, describe, expect, it } from 'vitest';
import { RingWriter } from '../../src/link/ring.ts';
import { FlacRoom } from '../../src/snapshot/flac-room.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { SnapshotKeeper } from '../../src/station/snapshot-keeper.ts';
import { makeReading } from '../alarm/support.ts';
import { stationOf } from '../config/station-text.ts';

const rateHz = 1000;
/** A record of this point: as long as the interval, for averages need less. */
const recordS = 10;

const text = `
site: {id: weir, mains_hz: 50}
storage: {directory: FOLDER, max_mb: 64}
measure: {every_s: ${recordS}, velocity: {fmax_hz: 200, lines: 200, averages: 2}, envelope: {band_hz: [50, 350], lines: 100, averages: 2}}
links: [{id: node-1, serial: {path: /dev/null, baud: 115200}, format: frames}]
machines:
  - id: pump-1
    shaft: {rpm: 1500, tolerance_pct: 3}
    points: [{id: h, link: node-1, channel: h}, {id: v, link: node-1, channel: v}, {id: a, link: node-1, channel: a}]
`;

const folders: string[] = [];
afterEach(() => {
  for (const folder of folders.splice(0)) rmSync(folder, { recursive: true, force: true });
});

function rig(folder = mkdtempSync(join(tmpdir(), 'forebay-keeper-'))) {
  folders.push(folder);
  const station = stationOf(text.replace('FOLDER', folder));
  let ring = new RingWriter(4, 25 * rateHz);
  ring.beginEpoch(1, 0);
  /** The link is closed and another one opened in its place, as by a new configuration. */
  const reopenLink = () => {
    ring = new RingWriter(4, 25 * rateHz);
    ring.beginEpoch(1, 0);
    return new WeakRef(ring.memory);
  };
  /** The node begins anew. */
  const restartNode = () => ring.beginEpoch(++state.epoch, 0);
  const state = {
    epoch: 1,
    seconds: 0,
    headS: 0,
    trouble: null as string | null,
    clock: 'synchronised' as 'synchronised' | 'free',
    running: null as boolean | null,
    unacknowledged: new Set<string>(),
  };
  const wallMs = (seconds: number) => Date.parse('2026-03-02T10:15:30Z') + seconds * 1000;
  const channels = ['h', 'v', 'a', 'tach'].map((name) => ({
    name,
    unit: name === 'tach' ? ('logic' as const) : ('g' as const),
    unitsPerCount: name === 'tach' ? 1 : 0.001,
    countRange: null,
  }));
  const description = { node: 7, serialNumber: 'A1', firmware: '0.9', nominalRateHz: rateHz, channels };
  const worker = new FlacRoom(new URL('../../dist/snapshot/flac-worker.js', import.meta.url));
  const logged: string[] = [];
  const keeper = new SnapshotKeeper(
    '0.1.0',
    {
      station: () => station,
      source: (link) =>
        link === 'node-1'
          ? {
              link,
              memory: ring.memory,
              epoch: state.epoch,
              epochFirst: 0,
              head: ring.head,
              headMs: wallMs(state.headS),
              trouble: state.trouble,
              description,
              rate: { hz: rateHz, source: 'nominal', ppm: null },
            }
          : null,
      wallMs: () => wallMs(state.seconds),
      monotonicS: () => state.seconds,
      runS: () => state.seconds,
      clock: () => state.clock,
      unacknowledged: (alarm) => state.unacknowledged.has(alarm),
      running: () => state.running,
      log: (message, details) => logged.push(`${message} ${String(details.err)}`),
    },
    worker,
  );
  /** Time goes by, with samples or without. */
  const pass = (seconds: number, samples = true) => {
    for (let s = 0; s < seconds; s++) {
      if (samples) {
        const first = ring.head;
        const planar = Int32Array.from({ length: 4 * rateHz }, (_, k) => (first + (k % rateHz)) % 30_000);
        ring.append(planar, rateHz, rateHz);
      }
      state.seconds++;
      if (samples) state.headS = state.seconds;
      keeper.tick();
    }
  };
  /** The reading that ends now. */
  const reading = () => ({
    ...makeReading({}),
    first_index: ring.head - recordS * rateHz,
    rate: { hz: rateHz, source: 'nominal' as const, ppm: null },
  });
  const tell = (what: 'begin' | 'keep' | 'drop', alarm: string, of = reading()) =>
    keeper.evidence({ kind: 'evidence', alarm, pointKey: alarm.split('.')[0]!, what }, of);
  const files = () => readdirSync(join(folder, 'snapshots')).filter((name) => name.endsWith('.flac'));
  return { folder, keeper, reopenLink, restartNode, state, worker, logged, pass, reading, tell, files };
}

describe('the keeper of snapshots', () => {
  it('freezes the samples about the first reading over a limit, and keeps them when the alarm comes of it', async () => {
    const { keeper, worker, pass, tell, files } = rig();
    pass(40);
    tell('begin', 'pump-1/h.zone');
    // The ring goes on while the alarm matures: what is kept was frozen at the beginning.
    pass(60);
    expect(files()).toEqual([]);
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged');
    expect(id).toMatch(/^20260302T101610Z-pump-1-[0-9a-f]{4}$/);
    tell('keep', 'pump-1/h.zone');
    pass(1);
    await worker.idle();
    await keeper.stop();
    const recording = openRecording(keeper.shelf.get(id!)!.path);
    expect(recording).toMatchObject({ channels: 4, frames: 15 * rateHz });
    expect(recording.tags).toMatchObject({
      firstIndex: 30 * rateHz,
      start: '2026-03-02T10:16:00.000Z',
      alarms: ['pump-1/h.zone'],
      channels: [
        { points: ['pump-1/h'] },
        { points: ['pump-1/v'] },
        { points: ['pump-1/a'] },
        { points: [], unit: 'logic' },
      ],
    });
    expect(recording.read(0, 1).map(([count]) => count)).toEqual([0, 0, 0, 0]);
    // Acknowledged it is named still, normal no more.
    expect(keeper.snapshotOf('pump-1/h.zone', 'acknowledged')).toBe(id);
    expect(keeper.snapshotOf('pump-1/h.zone', 'normal')).toBeNull();
  });

  it('drops them where the reading passes off, and names nothing', async () => {
    const { keeper, worker, pass, tell, files } = rig();
    pass(30);
    tell('begin', 'pump-1/h.zone');
    pass(20);
    tell('drop', 'pump-1/h.zone');
    pass(5);
    await worker.idle();
    expect(files()).toEqual([]);
    expect(keeper.counters().making).toBe(0);
    expect(keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')).toBeNull();
  });

  it('lets a second alarm refer to the same samples, or makes them longer, but keeps nothing twice', async () => {
    const { keeper, worker, pass, tell } = rig();
    pass(40);
    tell('begin', 'pump-1/h.zone');
    tell('begin', 'pump-1/v.zone');
    pass(3);
    tell('begin', 'pump-1/a.zone');
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged');
    expect(keeper.snapshotOf('pump-1/v.zone', 'unacknowledged')).toBe(id);
    pass(10);
    await keeper.stop();
    // Written already: the third, whose reading it holds, refers to it as well.
    expect(keeper.snapshotOf('pump-1/a.zone', 'unacknowledged')).toBe(id);
    await worker.idle();
    expect(keeper.shelf.all.map((one) => one.id)).toEqual([id]);
    // From 10 s before the first reading's end to 5 s after the last one's.
    expect(keeper.shelf.get(id!)!.frames).toBe(18 * rateHz);
  });

  it('begins another where the reading lies beyond, and ends a growing one after 30 s', async () => {
    const { keeper, worker, pass, tell } = rig();
    pass(40);
    tell('begin', 'pump-1/h.zone');
    keeper.snapshotOf('pump-1/h.zone', 'unacknowledged');
    for (let k = 0; k < 9; k++) {
      pass(4);
      tell('begin', `pump-1/v.r${k}`);
      keeper.snapshotOf(`pump-1/v.r${k}`, 'unacknowledged');
    }
    pass(20);
    await worker.idle();
    await keeper.stop();
    const [first, second] = keeper.shelf.all;
    expect(keeper.shelf.all.length).toBe(2);
    expect(first!.frames).toBe(30 * rateHz);
    expect(second!.tags.firstIndex).toBeGreaterThan(first!.tags.firstIndex);
  });

  it('begins another where the link was opened anew, though its numbers are the same', async () => {
    const { keeper, reopenLink, pass, tell } = rig();
    const named = ['h', 'v', 'a'].map((point) => {
      pass(30);
      tell('begin', `pump-1/${point}.zone`);
      const id = keeper.snapshotOf(`pump-1/${point}.zone`, 'unacknowledged');
      // Of the first the alarm has its samples, the second is growing still.
      pass(point === 'h' ? 10 : 2);
      reopenLink();
      return id;
    });
    expect(new Set(named).size).toBe(3);
    await keeper.stop();
    expect(keeper.shelf.all.map(({ frames }) => frames / rateHz)).toEqual([15, 12, 12]);
  });

  it('names only what holds the reading: not one that a silence ended before', async () => {
    const { keeper, pass, tell } = rig();
    pass(40);
    tell('begin', 'pump-1/h.zone');
    const silent = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    pass(2);
    pass(20, false);
    pass(1);
    tell('begin', 'pump-1/v.zone');
    const heard = keeper.snapshotOf('pump-1/v.zone', 'unacknowledged')!;
    await keeper.stop();
    expect(keeper.shelf.get(silent)!.frames).toBe(12 * rateHz);
    const { tags, frames } = keeper.shelf.get(heard)!;
    expect(tags.firstIndex + frames).toBe(43 * rateHz);
  });

  it('names nothing where the samples of the reading are gone, and counts that', async () => {
    const { keeper, restartNode, logged, pass, reading, tell, files } = rig();
    pass(20);
    const old = reading();
    pass(40);
    // It waited for the database: the ring holds 25 s.
    tell('begin', 'pump-1/h.zone', old);
    expect(keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')).toBeNull();
    tell('begin', 'pump-1/v.zone');
    expect(keeper.snapshotOf('pump-1/v.zone', 'unacknowledged')).not.toBeNull();
    const before = reading();
    restartNode();
    pass(1);
    tell('begin', 'pump-1/a.zone', before);
    expect(keeper.snapshotOf('pump-1/a.zone', 'unacknowledged')).toBeNull();
    await keeper.stop();
    expect(files()).toHaveLength(1);
    expect(keeper.counters()).toMatchObject({ kept: 1, making: 0, lost: 2 });
    expect(logged.join()).toContain('the samples of a reading over its limit are gone');
  });

  it('says of clock and speed what held when it was frozen, not when its alarm came', async () => {
    const { keeper, state, pass, reading, tell } = rig();
    pass(30);
    state.clock = 'free';
    const shaft = (hz: number | null) => ({ ...reading(), shaft: { hz, source: 'spectrum' as const } });
    keeper.noteReading('pump-1', shaft(24.7));
    tell('begin', 'pump-1/h.zone');
    pass(600);
    state.clock = 'synchronised';
    keeper.noteReading('pump-1', shaft(null));
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    await keeper.stop();
    expect(keeper.shelf.get(id)!.tags).toMatchObject({
      clock: 'free',
      shafts: [{ machine: 'pump-1', hz: 24.7, source: 'spectrum' }],
    });
  });

  it('holds no ring of a link that is gone, be it written or still waiting for its alarm', async () => {
    v8.setFlagsFromString('--expose-gc');
    const collect = vm.runInNewContext('gc') as () => void;
    const { keeper, reopenLink, worker, pass, tell } = rig();
    const rings: WeakRef<SharedArrayBuffer>[] = [];
    for (let round = 0; round < 6; round++) {
      rings.push(reopenLink());
      pass(30);
      tell('begin', `pump-1/h.r${round}`);
      if (round % 2 === 0) keeper.snapshotOf(`pump-1/h.r${round}`, 'unacknowledged');
      pass(20);
      await worker.idle();
    }
    reopenLink();
    expect(keeper.counters()).toMatchObject({ kept: 3, making: 3 });
    for (let tries = 0; tries < 20 && rings.some((ring) => ring.deref()); tries++) {
      await sleep(20);
      collect();
    }
    expect(rings.filter((ring) => ring.deref())).toEqual([]);
  });

  it('makes none longer than there is memory for', async () => {
    const { keeper, restartNode, pass, tell } = rig();
    // 15 s of 4 channels at 1 kHz are 240 kB: 209 of them fit into 48 MiB.
    for (let k = 0; k < 208; k++) {
      pass(10);
      tell('begin', `pump-1/h.r${k}`);
      restartNode();
    }
    pass(10);
    tell('begin', 'pump-1/h.zone');
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    for (let k = 0; k < 3; k++) {
      pass(4);
      tell('begin', `pump-1/v.r${k}`);
      expect(keeper.snapshotOf(`pump-1/v.r${k}`, 'unacknowledged')).toBe(id);
    }
    expect(keeper.counters()).toMatchObject({ making: 209, lost: 0 });
    pass(5);
    await keeper.stop();
    // Twice 4 s more fit, not three times.
    expect(keeper.shelf.get(id)!.frames).toBe((15 + 2 * 4) * rateHz);
  });

  it('writes a flood of them one after the other, and loses none', async () => {
    const { keeper, restartNode, worker, pass, tell } = rig();
    const named: (string | null)[] = [];
    for (let k = 0; k < 12; k++) {
      pass(10);
      tell('begin', `pump-1/h.r${k}`);
      named.push(keeper.snapshotOf(`pump-1/h.r${k}`, 'unacknowledged'));
      restartNode();
    }
    for (let k = 0; k < 10; k++) {
      pass(1);
      await worker.idle();
    }
    expect(keeper.counters()).toMatchObject({ kept: 12, making: 0, lost: 0 });
    expect(keeper.shelf.all.map(({ id }) => id).sort()).toEqual(named.toSorted());
  });

  it('names no waveform of an earlier time where there is none of this one', async () => {
    const { folder, keeper, pass, tell } = rig();
    pass(30);
    tell('begin', 'pump-1/h.zone');
    expect(keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')).not.toBeNull();
    pass(10);
    await keeper.stop();
    expect(keeper.snapshotOf('pump-1/h.zone', 'normal')).toBeNull();
    // It was restarted between the first reading over the limit and the alarm.
    expect(rig(folder).keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')).toBeNull();
  });

  it('gives the alarm of the machine as a whole the waveform of its points', async () => {
    const { keeper, pass, tell } = rig();
    pass(30);
    for (const point of ['h', 'v', 'a']) tell('begin', `pump-1/${point}.zone`);
    const id = keeper.snapshotOf('pump-1/machine.zone', 'unacknowledged');
    expect(id).not.toBeNull();
    expect(keeper.snapshotOf('pump-1/machine.bearing', 'unacknowledged')).toBeNull();
    expect(keeper.snapshotOf('agent/node-1.silent', 'unacknowledged')).toBeNull();
    await keeper.stop();
    expect(keeper.shelf.get(id!)!.tags.alarms).toEqual(['pump-1/machine.zone']);
  });

  it('takes what there is where the node falls silent or restarts, and where the agent stops', async () => {
    const { keeper, restartNode, worker, pass, tell } = rig();
    pass(30);
    tell('begin', 'pump-1/h.zone');
    const silent = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    pass(20, false);
    await worker.idle();
    await keeper.stop();
    expect(keeper.shelf.get(silent)!.frames).toBe(10 * rateHz);
    pass(5);
    tell('begin', 'pump-1/v.zone');
    const restarted = keeper.snapshotOf('pump-1/v.zone', 'unacknowledged')!;
    restartNode();
    pass(2);
    await keeper.stop();
    expect(keeper.shelf.get(restarted)).not.toBeNull();
  });

  it('keeps starts and coast-downs by themselves', async () => {
    const { keeper, state, worker, pass } = rig();
    state.running = false;
    pass(30);
    state.running = true;
    pass(8);
    state.running = null;
    pass(3);
    state.running = false;
    pass(8);
    await worker.idle();
    await keeper.stop();
    expect(keeper.shelf.all.map(({ tags }) => [tags.kind, tags.cause])).toEqual([
      ['start', 'start of pump-1'],
      ['coast-down', 'coast-down of pump-1'],
    ]);
  });

  it('takes the newest samples on demand, but none of a node that is not heard', async () => {
    const { keeper, state, pass, files } = rig();
    await expect(keeper.take('node-1', 5, 'asked')).rejects.toThrow('link node-1 has had no samples yet');
    await expect(keeper.take('node-2', 5, 'asked')).rejects.toThrow('link node-2 has had no samples yet');
    pass(20);
    const { tags, frames } = await keeper.take('node-1', 5, 'asked');
    expect(frames).toBe(5 * rateHz);
    expect(tags).toMatchObject({ kind: 'asked', firstIndex: 15 * rateHz, start: '2026-03-02T10:15:45.000Z' });
    pass(41, false);
    state.trouble = 'no bytes for 3 s';
    await expect(keeper.take('node-1', 5, 'asked')).rejects.toThrow(
      'link node-1 is not receiving: no bytes for 3 s',
    );
    pass(2, false);
    expect(files()).toHaveLength(1);
    expect(keeper.counters()).toMatchObject({ kept: 1, making: 0, lost: 0 });
  });

  it('dates samples by when they came, however late they are frozen', async () => {
    const { keeper, worker, pass, tell } = rig();
    pass(40);
    pass(8, false);
    tell('begin', 'pump-1/h.zone');
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    await keeper.stop();
    await worker.idle();
    expect(keeper.shelf.get(id)!.tags).toMatchObject({
      firstIndex: 30 * rateHz,
      start: '2026-03-02T10:16:00.000Z',
    });
  });

  it('keeps no start of a node that is not heard', async () => {
    const { keeper, state, worker, pass } = rig();
    state.running = false;
    pass(30);
    state.trouble = 'no bytes for 3 s';
    state.running = true;
    pass(30, false);
    await worker.idle();
    expect(keeper.counters()).toMatchObject({ kept: 0, making: 0, lost: 0 });
  });

  it('remembers across a restart which waveform an alarm named', async () => {
    const { folder, keeper, pass, tell } = rig();
    pass(30);
    tell('begin', 'pump-1/h.zone');
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged');
    await keeper.stop();
    const again = rig(folder);
    expect(again.keeper.snapshotOf('pump-1/h.zone', 'returned-unacknowledged')).toBe(id);
  });

  it('counts what could not be written, and says so', async () => {
    const { folder, keeper, worker, logged, pass, tell } = rig();
    pass(30);
    tell('begin', 'pump-1/h.zone');
    const id = keeper.snapshotOf('pump-1/h.zone', 'unacknowledged')!;
    rmSync(join(folder, 'snapshots'), { recursive: true });
    pass(10);
    await worker.idle();
    await keeper.stop();
    expect(keeper.counters()).toMatchObject({ lost: 1, kept: 0, making: 0 });
    expect(logged.join()).toMatch(/a snapshot could not be written.*ENOENT/);
    expect(keeper.snapshotOf('pump-1/h.zone', 'acknowledged')).toBeNull();
    expect(existsSync(keeper.shelf.pathOf(id))).toBe(false);
  });
});
