import { Worker } from 'node:worker_threads';
import fc from 'fast-check';
import { build } from 'vite';
import { describe, expect, it } from 'vitest';
import { GAP_TABLE_ENTRIES } from '../../src/link/gap-table.ts';
import { GUARD_SAMPLES, RingReader, RingWriter } from '../../src/link/ring.ts';

/** A count that tells its index and channel. */
const countOf = (index: number, channel: number) => (Math.imul(index % 2 ** 31, 0x9e3779b1) + channel) | 0;

function planar(firstIndex: number, n: number, channels: number): Int32Array {
  return Int32Array.from({ length: n * channels }, (_, k) =>
    countOf(firstIndex + (k % n), Math.floor(k / n)),
  );
}

function begun(channels: number, samples: number, firstIndex = 0) {
  const writer = new RingWriter(channels, samples);
  writer.beginEpoch(1, firstIndex);
  const reader = new RingReader(writer.memory);
  const write = (n: number) => writer.append(planar(writer.head, n, channels), n, n);
  return { writer, reader, write };
}

describe('the ring', () => {
  it('gives back each channel, whole or in part', () => {
    const { reader, write } = begun(3, 1000);
    write(400);
    write(300);
    const into = new Int32Array(250);
    for (let channel = 0; channel < 3; channel++) {
      expect(reader.read(1, channel, 350, 250, into)).toBe('ok');
      expect([...into]).toEqual(Array.from({ length: 250 }, (_, i) => countOf(350 + i, channel)));
    }
  });

  it('says what is not there yet, no longer, or of another epoch', () => {
    const { writer, reader, write } = begun(1, 1000, 5000);
    const into = new Int32Array(20_000);
    write(100);
    expect(reader.read(1, 0, 5000, 101, into)).toBe('not-yet');
    expect(reader.read(1, 0, 4999, 10, into)).toBe('overwritten');
    expect(reader.read(2, 0, 5000, 10, into)).toBe('other-epoch');
    for (let k = 0; k < 20; k++) write(1000);
    expect(reader.head).toBe(25_100);
    expect(reader.read(1, 0, 25_100 - 1000, 1000, into)).toBe('ok');
    expect(reader.read(1, 0, 25_100 - 1001, 1000, into)).toBe('overwritten');
    writer.beginEpoch(2, 0);
    expect(reader.read(1, 0, 24_100, 1000, into)).toBe('other-epoch');
    expect(reader.read(2, 0, 0, 1, into)).toBe('not-yet');
    expect(reader.epoch).toBe(2);
  });

  it('holds zeros for missing samples, and how many they are', () => {
    const { writer, reader, write } = begun(2, 1000);
    write(1000);
    writer.skip(50);
    write(100);
    const into = new Int32Array(1000);
    expect(reader.read(1, 1, 950, 150, into)).toBe('ok');
    expect([...into.subarray(50, 100)]).toEqual(new Array(50).fill(0));
    expect(into[100]).toBe(countOf(1050, 1));
    expect(reader.missingWithin(0, 1000)).toBe(0);
    expect(reader.missingWithin(1050, 100)).toBe(0);
    expect(reader.missingWithin(1010, 500)).toBe(40);
    expect(reader.missingWithin(900, 1000)).toBe(50);
  });

  it('survives a gap that is longer than itself', () => {
    const { writer, reader, write } = begun(1, 100);
    write(10_000);
    writer.skip(1e12);
    write(60);
    const into = new Int32Array(100);
    const head = 10_000 + 1e12 + 60;
    expect(reader.head).toBe(head);
    expect(reader.read(1, 0, head - 100, 100, into)).toBe('ok');
    expect([...into.subarray(0, 40)]).toEqual(new Array(40).fill(0));
    expect(into[40]).toBe(countOf(head - 60, 0));
    expect(reader.missingWithin(head - 100, 100)).toBe(40);
    expect(reader.read(1, 0, 5000, 10, into)).toBe('overwritten');
  });

  it('joins gaps when there are too many, counting too much as missing and never too little', () => {
    const { writer, reader, write } = begun(1, 100_000);
    for (let k = 0; k < GAP_TABLE_ENTRIES + 10; k++) {
      writer.skip(1);
      write(9);
    }
    expect(writer.gapsJoined).toBe(10);
    // The first eleven gaps have become one of 10 × 10 + 1 samples.
    expect(reader.missingWithin(0, 10_000)).toBe(GAP_TABLE_ENTRIES - 1 + 101);
    expect(reader.missingWithin(1000, 1000)).toBe(100);
  });

  it('forgets gaps that are out of the ring, and those of an earlier epoch', () => {
    const { writer, reader, write } = begun(1, 100);
    for (let k = 0; k < 3 * GAP_TABLE_ENTRIES; k++) {
      writer.skip(1);
      write(2000);
    }
    expect(writer.gapsJoined).toBe(0);
    expect(reader.missingWithin(0, writer.head)).toBeLessThanOrEqual(6);
    writer.beginEpoch(2, 0);
    expect(reader.missingWithin(0, 1e9)).toBe(0);
  });

  it('refuses what is no ring, no channel, no index', () => {
    expect(() => new RingReader(new SharedArrayBuffer(10_000))).toThrow(TypeError);
    expect(() => new RingWriter(0, 10)).toThrow(RangeError);
    expect(() => new RingWriter(1, 10).append(new Int32Array(1), 1, 1)).toThrow(/epoch/);
    const { writer, reader } = begun(1, 10, Number.MAX_SAFE_INTEGER - 1);
    expect(() => writer.append(new Int32Array(2), 2, 2)).toThrow(/2\^53/);
    expect(() => writer.skip(2)).toThrow(/2\^53/);
    expect(() => reader.read(1, 1, 0, 1, new Int32Array(1))).toThrow(/channel/);
    expect(() => reader.read(1, 0, 0, 2, new Int32Array(1))).toThrow(/fit/);
  });

  it('does as a plain list does, over random actions', () => {
    const action = fc.oneof(
      fc.record({ do: fc.constant('write' as const), n: fc.integer({ min: 1, max: 700 }) }),
      fc.record({ do: fc.constant('skip' as const), n: fc.integer({ min: 1, max: 12_000 }) }),
      fc.record({ do: fc.constant('epoch' as const), n: fc.nat(1e6) }),
    );
    const samples = 2000;
    fc.assert(
      fc.property(
        fc.array(action, { maxLength: 40 }),
        fc.nat(2000),
        fc.integer({ min: 1, max: 500 }),
        (actions, back, n) => {
          const { writer, reader, write } = begun(2, samples);
          let epoch = 1;
          let start = 0;
          const present = new Set<number>();
          for (const step of actions) {
            if (step.do === 'epoch') {
              writer.beginEpoch(++epoch, step.n);
              start = step.n;
              present.clear();
            } else if (step.do === 'skip') writer.skip(step.n);
            else {
              for (let i = 0; i < step.n; i++) present.add(writer.head + i);
              write(step.n);
            }
          }
          const first = writer.head - back;
          const into = new Int32Array(n);
          const result = reader.read(epoch, 1, first, n, into);
          const expected =
            first < Math.max(start, writer.head - samples)
              ? 'overwritten'
              : first + n > writer.head
                ? 'not-yet'
                : 'ok';
          expect(result).toBe(expected);
          if (result !== 'ok') return;
          const wanted = Array.from({ length: n }, (_, i) =>
            present.has(first + i) ? countOf(first + i, 1) : 0,
          );
          expect([...into]).toEqual(wanted);
          expect(reader.missingWithin(first, n)).toBe(
            wanted.filter((_, i) => !present.has(first + i)).length,
          );
        },
      ),
      { seed: 2, numRuns: 200 },
    );
  });

  it('gives a reader in another thread nothing torn while it is written', async () => {
    const { writer, reader, write } = begun(2, 3 * GUARD_SAMPLES);
    write(30_000);
    const built = await build({
      configFile: false,
      logLevel: 'silent',
      build: {
        write: false,
        minify: false,
        lib: { entry: new URL('../../src/link/ring.ts', import.meta.url).pathname, formats: ['es'] },
      },
    });
    const output = (Array.isArray(built) ? built[0]! : built) as { output: { code: string }[] };
    // Reads records at and beyond the edge of what is being overwritten, until it has seen enough of both.
    const program = `${output.output[0]!.code}
      import { parentPort, workerData } from 'node:worker_threads';
      const countOf = ${countOf.toString()};
      const ring = new RingReader(workerData);
      const into = new Int32Array(6000);
      const seen = { ok: 0, overwritten: 0, torn: 0, moved: 0 };
      const start = Date.now();
      for (let k = 0; k < 2000 || ((seen.overwritten < 50 || seen.ok < 100) && Date.now() - start < 10000); k++) {
        const head = ring.head;
        const first = head - ring.samples + (k % 7) * 300;
        const channel = k % 2;
        const result = ring.read(1, channel, first, 6000, into);
        seen[result] = (seen[result] ?? 0) + 1;
        if (ring.head !== head) seen.moved++;
        if (result !== 'ok') continue;
        for (let i = 0; i < 6000; i++) if (into[i] !== countOf(first + i, channel)) { seen.torn++; break; }
      }
      parentPort.postMessage(seen);`;
    const worker = new Worker(new URL(`data:text/javascript,${encodeURIComponent(program)}`), {
      workerData: writer.memory,
    });
    let seen: Record<string, number> | null = null;
    const ended = new Promise<void>((resolve, reject) => {
      worker.on('message', (message) => {
        seen = message;
      });
      worker.on('error', reject);
      worker.on('exit', () => resolve());
    });
    while (seen === null && worker.threadId !== -1) {
      for (let k = 0; k < 40; k++) write(97 + (k % 400));
      await new Promise((resolve) => setImmediate(resolve));
    }
    await ended;
    expect(seen).toMatchObject({ torn: 0 });
    expect(seen!.ok).toBeGreaterThan(0);
    expect(seen!.overwritten).toBeGreaterThan(0);
    expect(seen!.moved).toBeGreaterThan(0);
    expect(reader.head).toBeGreaterThan(30_000);
  });
});
