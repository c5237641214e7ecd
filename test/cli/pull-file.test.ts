/** What `forebay pull` keeps of a file that arrives in parts, and what it says on the way. */
import { createHash } from 'node:crypto';
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { PartFile, savedOf } from '../../src/cli/part-file.ts';
import { ProgressBar } from '../../src/cli/progress-bar.ts';

const bytes = Buffer.from(Array.from({ length: 2500 }, (_, i) => i % 251));
const whole = {
  snapshot: 'a',
  bytes: bytes.length,
  sha256: createHash('sha256').update(bytes).digest('hex'),
  partBytes: 1000,
  parts: 3,
};
const part = (n: number) => bytes.subarray(n * 1000, (n + 1) * 1000);

let folder = '';
let path = '';
beforeEach(() => {
  folder = mkdtempSync(join(tmpdir(), 'forebay-pull-'));
  path = join(folder, 'out.flac');
});
afterEach(() => rmSync(folder, { recursive: true, force: true }));

describe('a file that arrives in parts', () => {
  it('takes them in any order, each once, and gets its name when it is whole', async () => {
    const file = new PartFile(path, whole);
    expect(file.put(2, part(2))).toBe(true);
    expect([file.missing, file.bytesHere]).toEqual([[0, 1], 500]);
    expect(file.put(2, part(2))).toBe(false);
    expect(file.put(0, part(0))).toBe(true);
    expect(file.put(1, part(1))).toBe(true);
    expect([file.missing, file.bytesHere]).toEqual([[], 2500]);
    expect(existsSync(path)).toBe(false);
    await file.finish();
    expect(readFileSync(path)).toEqual(bytes);
    expect(existsSync(`${path}.part`)).toBe(false);
  });

  it.each([
    ['no part of it', 3, part(0)],
    ['not a number', Number.NaN, part(0)],
    ['too short', 0, part(2)],
    ['too long', 2, part(0)],
  ])('drops what is %s', (_, n, payload) => {
    const file = new PartFile(path, whole);
    expect(file.put(n, payload)).toBe(false);
    expect(file.bytesHere).toBe(0);
    file.close();
  });

  it('goes on where it was saved, and begins anew for another file', () => {
    const file = new PartFile(path, whole);
    file.put(1, part(1));
    file.save();
    file.close();
    expect(savedOf(path)).toMatchObject({ snapshot: 'a', have: [1] });
    const again = new PartFile(path, whole);
    expect(again.missing).toEqual([0, 2]);
    again.close();
    const other = new PartFile(path, { ...whole, sha256: '0'.repeat(64) });
    expect(other.missing).toEqual([0, 1, 2]);
    other.close();
  });

  it('begins anew where what was saved makes no sense', () => {
    writeFileSync(`${path}.part`, 'x');
    writeFileSync(`${path}.part.json`, '{"have": [1], "snap');
    expect(savedOf(path)).toBeNull();
    writeFileSync(`${path}.part.json`, JSON.stringify({ ...whole, have: [0, 77, -1, 'x', 0] }));
    const file = new PartFile(path, whole);
    expect(file.missing).toEqual([1, 2]);
    expect(file.bytesHere).toBe(1000);
    file.close();
  });

  it('keeps nothing of what arrived damaged', async () => {
    const file = new PartFile(path, whole);
    for (const n of [0, 1]) file.put(n, part(n));
    file.put(2, Buffer.alloc(500, 7));
    file.save();
    await expect(file.finish()).rejects.toMatchObject({ code: 'pull.damaged' });
    expect([path, `${path}.part`, `${path}.part.json`].filter((name) => existsSync(name))).toEqual([]);
  });

  it('says where it cannot be written', () => {
    expect(() => new PartFile(join(folder, 'no/such/out.flac'), whole)).toThrow(
      expect.objectContaining({ code: 'file.unwritable' }),
    );
  });
});

describe('the progress of a pull', () => {
  function rig(isTTY: boolean) {
    const written: string[] = [];
    const clock = { s: 0 };
    const bar = new ProgressBar({ isTTY, write: (text: string) => written.push(text) }, () => clock.s);
    return { bar, clock, written };
  }

  it('is drawn over itself on a terminal, with rate and time left', () => {
    const { bar, clock, written } = rig(true);
    bar.show(0, 1_000_000);
    clock.s = 10;
    bar.show(50_000, 1_000_000);
    expect(written.at(-1)).toMatch(
      /^\r\[#\.{23}\] 5 % {2}50\.0 kB of 1\.00 MB {2}5\.0 kB\/s {2}3 min 10 s left/,
    );
    clock.s = 10.1;
    bar.show(60_000, 1_000_000);
    expect(written).toHaveLength(2);
  });

  it('is a line every ten seconds elsewhere, and one at the end', () => {
    const { bar, clock, written } = rig(false);
    for (let s = 0; s <= 24; s++) {
      clock.s = s;
      bar.show(s * 100, 2500);
    }
    clock.s = 25;
    bar.show(2500, 2500);
    expect(written).toHaveLength(4);
    expect(written[1]).toBe('[##########..............] 40 %  1.0 kB of 2.5 kB  100 B/s  15 s left\n');
    expect(written[3]).toBe('[########################] 100 %  2.5 kB of 2.5 kB  100 B/s\n');
  });

  it('tells the rate of the last while, not of a stretch that was here before', () => {
    const { bar, clock, written } = rig(false);
    bar.show(900_000, 1_000_000);
    for (let s = 1; s <= 40; s++) {
      clock.s = s;
      bar.show(900_000 + s * 1000, 1_000_000);
    }
    expect(written.at(-1)).toContain('1.0 kB/s  1 min 0 s left');
  });
});
