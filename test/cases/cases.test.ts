/**
 * Whole stories through `forebay replay`: a folder a case, with its station, the recipe of its recording and the alarm
 * lines that must come out. The lines are worked out by hand from the story, as told in each recipe; records are one
 * second long (two for the bearing), the label of record k is that of its last sample.
 */
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { afterAll, describe, expect, it } from 'vitest';
import { replayCommand } from '../../src/cli/replay.ts';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { wavBytes } from '../support/wav.ts';
import { type Case, fullScaleG } from './signal.ts';

type Line = Record<string, unknown>;

const here = fileURLToPath(new URL('.', import.meta.url));
const cases = readdirSync(here, { withFileTypes: true })
  .filter((entry) => entry.isDirectory())
  .map(({ name }) => name);
const scratch = mkdtempSync(join(tmpdir(), 'forebay-cases-'));
afterAll(() => rmSync(scratch, { recursive: true, force: true }));

const linesOf = (text: string) =>
  text
    .split('\n')
    .filter((line) => line !== '')
    .map((line) => JSON.parse(line) as Line);

async function replay(name: string): Promise<Line[]> {
  const { recipe } = (await import(`./${name}/make.ts`)) as { recipe: Case };
  const file = join(scratch, `${name}.wav`);
  writeFileSync(file, wavBytes(recipe.counts(), recipe.rateHz, 16));
  let out = '';
  const config = join(here, name, 'station.yaml');
  const write = (text: string) => {
    out += text;
  };
  const options = { config, points: recipe.points, fullScaleG, json: true };
  expect(await replayCommand(file, options, { write }, { write: () => undefined })).toBe(0);
  return linesOf(out).filter(({ kind }) => kind === 'alarm');
}

const numberOf = (line: Line) => Number(String(line.id).split('-').at(-1));

/** A pair is a range, for what is measured; a number is met within 1 %. */
function meets(actual: unknown, expected: unknown): boolean {
  if (Array.isArray(expected)) return (actual as string) >= expected[0] && (actual as string) <= expected[1];
  if (typeof expected !== 'number') return actual === expected;
  return typeof actual === 'number' && Math.abs(actual - expected) <= 0.01 * Math.abs(expected);
}

describe('a case', () => {
  it('has a folder', () => {
    expect(cases.length).toBeGreaterThanOrEqual(6);
  });

  it.each(cases)(
    '%s',
    async (name) => {
      const expected = linesOf(readFileSync(join(here, name, 'expected.jsonl'), 'utf8'));
      const lines = await replay(name);
      const brief = (list: Line[]) => list.map(({ alarm, state, level }) => `${alarm} ${state} ${level}`);
      expect(brief(lines)).toEqual(brief(expected));
      const raised = new Map<unknown, unknown>();
      lines.forEach((line, i) => {
        const { raised: name, ...wanted } = expected[i]!;
        for (const [key, value] of Object.entries(wanted)) {
          expect(meets(line[key], value), `line ${i + 1}: ${key} is ${line[key]}, not ${value}`).toBe(true);
        }
        // `raised` in the file only tells one announcement from another.
        if (!raised.has(name)) {
          expect([...raised.values()]).not.toContain(line.raised);
          raised.set(name, line.raised);
        }
        expect(line.raised).toBe(raised.get(name));
        expect(line.check).not.toBe('');
        const { kind: _, machine: _m, alarm: _a, ...payload } = line;
        // Ids of a replay have no store of their own.
        const named = { ...payload, id: 'none-1', raised: 'none-1' };
        expect(payloadSchemas.alarm.safeParse(named).error).toBeUndefined();
      });
      const ns = lines.map(numberOf);
      expect(ns).toEqual([...ns].sort((a, b) => a - b));
      expect(new Set(ns).size).toBe(ns.length);
    },
    60_000,
  );
});
