/** What the station answers about waveforms, without a broker: what it refuses, and how much it sends. */
import { createHash } from 'node:crypto';
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { FlacRoom } from '../../src/snapshot/flac-room.ts';
import { writeSnapshot } from '../../src/snapshot/flac-write.ts';
import { openRecording } from '../../src/snapshot/recording.ts';
import { Shelf } from '../../src/snapshot/shelf.ts';
import { SnapshotAsks, type SnapshotUplink } from '../../src/station/snapshot-asks.ts';
import type { PartTransfer } from '../../src/uplink/part-sender.ts';
import { edited, stationOf } from '../config/station-text.ts';
import { uniform } from '../support/pump-signal.ts';
import { someTags } from '../support/tagged.ts';

type Handler = (ask: Record<string, unknown>) => Promise<Record<string, unknown>> | Record<string, unknown>;

const pumpOnTwoNodes = `
  - id: pump-3
    shaft: {rpm: 1480}
    points: [{id: h, link: node-1, channel: h}, {id: x, link: node-2, channel: x}]`;
const folder = mkdtempSync(join(tmpdir(), 'forebay-asks-'));
const id = someTags.id;
const frames = 120_000;
const state = { protocol: '5' as '5' | '3.1.1', left: 1e9, full: false };
const handlers = new Map<string, Handler>();
let sent: PartTransfer[] = [];
let cancelled: string[] = [];
let answered: Record<string, unknown>[] = [];

const uplink = {
  handle: (verb: string, handler: Handler) => void handlers.set(verb, handler),
  answer: async (_: string, body: Record<string, unknown>) => void answered.push(body),
  sendParts: (transfer: PartTransfer) => {
    if (!state.full) sent.push(transfer);
    return !state.full;
  },
  cancelParts: (askId: string) => cancelled.push(askId) > 0,
  waveformBudget: () => ({ leftBytes: state.left, renewsInS: 3600 }),
  status: () => ({ protocol: state.protocol }),
} as unknown as SnapshotUplink;

const ask = async (verb: string, body: Record<string, unknown>) =>
  await handlers.get(verb)!({ id: 'x-1', ...body });

async function assembled(transfer: PartTransfer): Promise<Buffer> {
  const parts: Buffer[] = [];
  for (const part of transfer.parts) parts.push(await transfer.read(part));
  return Buffer.concat(parts);
}

beforeAll(async () => {
  const shelf = new Shelf(
    folder,
    { number: 9, bytes: 1e9, ageS: 1e9 },
    { runS: () => 0, needed: () => false },
  );
  const random = uniform(3);
  const counts = someTags.channels.map(() =>
    Int32Array.from({ length: frames }, () => Math.floor(random() * 65_536) - 32_768),
  );
  await writeSnapshot({ path: shelf.pathOf(id), counts, tags: { ...someTags, gaps: [] } });
  shelf.add(id);
  const asks = new SnapshotAsks({
    keeper: {
      shelf,
      flac: new FlacRoom(new URL('../../dist/snapshot/flac-worker.js', import.meta.url)),
      isMaking: (name) => name === 'growing',
      take: async (link) => {
        if (link === 'node-2') throw new RangeError('link node-2 has had no samples yet');
        return shelf.get(id)!;
      },
    },
    station: () => stationOf(edited('\nalarms:', `${pumpOnTwoNodes}\nalarms:`)),
    wallMs: () => Date.parse('2026-03-02T10:00:00Z'),
  });
  asks.answer(uplink);
});
afterAll(() => rmSync(folder, { recursive: true, force: true }));
beforeEach(() => {
  for (const transfer of sent) transfer.ended(null);
  Object.assign(state, { protocol: '5', left: 1e9, full: false });
  [sent, cancelled, answered] = [[], [], []];
});

describe('ask/fetch', () => {
  it('says what it sends, and sends the file', async () => {
    const file = readFileSync(join(folder, `${id}.flac`));
    const answer = await ask('fetch', { snapshot: id });
    const parts = Math.ceil(file.length / 8192);
    expect(answer).toEqual({
      snapshot: id,
      bytes: file.length,
      sha256: createHash('sha256').update(file).digest('hex'),
      part_bytes: 8192,
      parts,
      sending: parts,
    });
    expect(sent[0]?.askId).toBe('x-1');
    expect((await assembled(sent[0]!)).equals(file)).toBe(true);
  });

  it('sends only the parts that are asked for, none where the list is empty, and refuses others', async () => {
    expect(await ask('fetch', { snapshot: id, parts: [7, 2, 2] })).toMatchObject({ sending: 2 });
    expect(sent[0]?.parts).toEqual([7, 2]);
    expect(await ask('fetch', { snapshot: id, parts: [], cancel: 'x-0' })).toMatchObject({ sending: 0 });
    expect(cancelled).toEqual(['x-0']);
    expect(sent).toHaveLength(1);
    await expect(ask('fetch', { snapshot: id, parts: [9999] })).rejects.toThrow(
      /there is no part 9999: there are \d+, from 0/,
    );
  });

  it('sends 64 parts at a time over MQTT 3.1.1, where nobody can be heard to have gone', async () => {
    state.protocol = '3.1.1';
    const answer = await ask('fetch', { snapshot: id });
    expect(answer.sending).toBe(64);
    expect(Number(answer.parts)).toBeGreaterThan(64);
    expect(sent[0]?.parts).toEqual(Array.from({ length: 64 }, (_, part) => part));
  });

  it('sends a cut as a file of its own, the same one when it is asked again', async () => {
    const cut = { snapshot: id, channels: ['v'], from_s: 0.5, seconds: 0.25 };
    const first = await ask('fetch', cut);
    const second = await ask('fetch', { ...cut, parts: [1] });
    expect(second.sha256).toBe(first.sha256);
    const path = join(folder, 'cuts', readdirSync(join(folder, 'cuts'))[0]!);
    expect(openRecording(path)).toMatchObject({ channels: 1, frames: Math.round(0.25 * someTags.rate.hz) });
    expect((await assembled(sent[0]!)).equals(readFileSync(path))).toBe(true);
    await expect(ask('fetch', { ...cut, channels: ['z'] })).rejects.toThrow(
      /cannot be made: it has the channels h, v, tach/,
    );
    // Bounded: of many cuts the oldest go.
    for (let k = 1; k <= 10; k++) await ask('fetch', { ...cut, seconds: k / 100, parts: [] });
    expect(readdirSync(join(folder, 'cuts')).length).toBeLessThanOrEqual(8);
  });

  it('goes on to the end though the file has made room for others meanwhile', async () => {
    const whole = readFileSync(join(folder, `${id}.flac`));
    await ask('fetch', { snapshot: id });
    const cut = { snapshot: id, channels: ['h'], from_s: 0.125 };
    await ask('fetch', { ...cut, seconds: 0.5 });
    const [, transfer] = sent;
    const bytes = Number((await ask('fetch', { ...cut, seconds: 0.5, parts: [] })).bytes);
    for (let k = 1; k <= 9; k++) await ask('fetch', { ...cut, seconds: k / 1000, parts: [] });
    expect((await assembled(transfer!)).length).toBe(bytes);
    rmSync(join(folder, `${id}.flac`));
    expect((await assembled(sent[0]!)).equals(whole)).toBe(true);
    await expect(ask('fetch', { snapshot: id })).rejects.toThrow(
      'the snapshot has been removed from the disk',
    );
    writeFileSync(join(folder, `${id}.flac`), whole);
  });

  it('is refused with a plain reason', async () => {
    await expect(ask('fetch', { snapshot: 'growing' })).rejects.toThrow(/not complete yet: try again/);
    await expect(ask('fetch', { snapshot: '../../etc/passwd' })).rejects.toThrow(/there is no snapshot/);
    state.left = 0;
    await expect(ask('fetch', { snapshot: id })).rejects.toThrow(
      'the daily budget for waveforms is spent until 2026-03-02T11:00:00.000Z',
    );
    state.left = 1;
    state.full = true;
    await expect(ask('fetch', { snapshot: id })).rejects.toThrow(/too many waveforms/);
    expect(sent).toEqual([]);
  });

  it('says so where the sending ends early, but not to whoever has gone', async () => {
    await ask('fetch', { snapshot: id });
    const transfer = sent[0]!;
    transfer.ended({ kind: 'nobody-listens', reason: '' });
    transfer.ended({ kind: 'cancelled', reason: '' });
    transfer.ended(null);
    expect(answered).toEqual([]);
    transfer.ended({ kind: 'budget', reason: '' });
    transfer.ended({ kind: 'failed', reason: 'no such file' });
    expect(answered).toMatchObject([
      {
        ask: 'x-1',
        ok: false,
        error: 'the daily budget for waveforms is spent until 2026-03-02T11:00:00.000Z',
      },
      { ask: 'x-1', ok: false, error: 'the waveform could not be sent on: no such file' },
    ]);
  });
});

describe('ask/snapshot and ask/snapshots', () => {
  it('takes one of each node of a machine, or of the node of a point', async () => {
    expect(await ask('snapshot', { point: 'pump-1/motor-h', seconds: 2 })).toMatchObject({ snapshot: id });
    expect((await ask('snapshot', { machine: 'pump-1' })).snapshots).toHaveLength(1);
    // One node of two is not heard: the other's is taken all the same.
    expect(await ask('snapshot', { machine: 'pump-3' })).toMatchObject({
      snapshot: id,
      snapshots: [{ snapshot: id }],
      missing: ['link node-2 has had no samples yet'],
    });
    await expect(ask('snapshot', { machine: 'pump-2' })).rejects.toThrow(
      'link node-2 has had no samples yet',
    );
    await expect(ask('snapshot', { machine: 'pump-9' })).rejects.toThrow('there is no machine pump-9');
    await expect(ask('snapshot', { point: 'pump-1/x' })).rejects.toThrow('there is no point pump-1/x');
    await expect(ask('snapshot', { point: 'pump-1/motor-h', seconds: 60 })).rejects.toThrow(
      /may be 15 s long/,
    );
  });

  it('lists what there is', async () => {
    expect(await ask('snapshots', {})).toEqual({
      snapshots: [
        {
          snapshot: id,
          t: someTags.start,
          seconds: 2.93,
          bytes: readFileSync(join(folder, `${id}.flac`)).length,
          machines: ['pump-1'],
          link: 'node-1',
          channels: ['h', 'v', 'tach'],
          kind: 'alarm',
          cause: someTags.cause,
          alarms: someTags.alarms,
        },
      ],
      more: false,
    });
  });
});
