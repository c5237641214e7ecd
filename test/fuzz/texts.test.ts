/** What people and programs write: station files and asks. */
import { readFileSync } from 'node:fs';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { parseStation } from '../../src/config/load.ts';
import { AskDispatcher, noAsks } from '../../src/uplink/asks.ts';
import { askSchemas } from '../../src/uplink/payload-schemas.ts';
import { stationText } from '../support/fault-station.ts';
import { damaged, runs, seed, timeout } from './mutate.ts';

const bytesOf = (text: string) => new TextEncoder().encode(text);
const example = (name: string) => readFileSync(new URL(`../../config/${name}`, import.meta.url), 'utf8');

describe('a station file', () => {
  it('is a station, or mistakes with their places', { timeout }, () => {
    const good = [
      example('minimal.yaml'),
      example('two-pumps.yaml'),
      stationText(1883).replaceAll('FOLDER', '/somewhere'),
    ].map(bytesOf);
    let stations = 0;
    let refused = 0;
    fc.assert(
      fc.property(damaged(good), (bytes) => {
        const text = new TextDecoder().decode(bytes);
        const result = parseStation(text, { file: 'station.yaml', baseDir: '/nowhere' });
        if ('station' in result) {
          stations++;
          expect(Object.isFrozen(result.station)).toBe(true);
          return;
        }
        refused++;
        expect(result.errors.length).toBeGreaterThan(0);
        const lines = text.split('\n').length;
        for (const { line, column, message } of result.errors) {
          expect(line).toBeGreaterThanOrEqual(1);
          expect(line).toBeLessThanOrEqual(lines + 1);
          expect(column).toBeGreaterThanOrEqual(1);
          expect(message).not.toBe('');
        }
      }),
      { seed, numRuns: runs(0.02) },
    );
    expect(stations).toBeGreaterThan(0);
    expect(refused).toBeGreaterThan(0);
  });
});

describe('an ask', () => {
  it('of any kind is done, refused or ignored, and no more', { timeout }, async () => {
    const verbs = [...Object.keys(askSchemas), '__proto__', 'constructor', ''];
    const good = [
      '{"id":"ask-1","alarm":"pump-1/p.zone","by":"ada","minutes":30,"level":"alert"}',
      '{"id":"ask-2","machine":"pump-1","by":"ada","text":"grease, and a note","why":"repair"}',
      '{"id":"ask-3","point":"pump-1/p","watch":"velocity.overall","from":"2026-03-01T00:00:00Z","to":"2026-03-02T00:00:00Z","points":50}',
      '{"id":"ask-4","since":"2026-03-01T00:00:00Z","snapshot":"abc","part":1,"hours":24}',
    ].map(bytesOf);
    let nowS = 0;
    let answers = 0;
    let failed = 0;
    const asks = new AskDispatcher(
      verbs,
      {
        answer: async (id) => {
          answers++;
          // An id becomes a topic and may become a file name.
          expect(id).toMatch(/^[A-Za-z0-9_-]{2,64}$/);
        },
        log: () => {
          failed++;
        },
        monotonicS: () => nowS,
      },
      noAsks(),
    );
    for (const verb of Object.keys(askSchemas)) asks.handle(verb as keyof typeof askSchemas, () => ({}));
    let taken = 0;
    await fc.assert(
      fc.asyncProperty(fc.constantFrom(...verbs), damaged(good), fc.nat(99), async (verb, bytes, fresh) => {
        nowS += 10;
        taken++;
        // Most ids are new: a repeated one is ignored.
        const text = Buffer.from(bytes).toString('latin1').replace('ask-', `ask-${taken}-${fresh}-`);
        await asks.take(verb, Buffer.from(text, 'latin1'), fresh === 0);
      }),
      { seed, numRuns: runs(0.08) },
    );
    const { done, refused, ignored } = asks.counters;
    expect(done + refused + ignored).toBe(taken);
    expect(answers).toBe(done + refused);
    expect(failed).toBe(0);
    expect(done).toBeGreaterThan(0);
  });
});
