/** The rooms of src/ import one way only: from themselves and from rooms above them in the list of DEVELOPERS.md. */
import { readdirSync, readFileSync } from 'node:fs';
import { dirname, join, relative, resolve, sep } from 'node:path';
import { fileURLToPath } from 'node:url';
import { parseSync } from 'oxc-parser';
import { describe, expect, it } from 'vitest';

const source = fileURLToPath(new URL('../../src', import.meta.url));
const rooms = [
  'signal',
  'machine',
  'config',
  'measure',
  'alarm',
  'link',
  'store',
  'snapshot',
  'uplink',
  'report',
  'simulate',
  'station',
  'cli',
];
/** Rooms that do arithmetic and judgement only: no packages but the transform and the schema, no Node modules. */
const pure: Record<string, readonly string[]> = { signal: ['fft.js'], machine: [], measure: [], alarm: [] };

interface Import {
  file: string;
  line: number;
  target: string;
}

function importsOf(file: string): Import[] {
  const text = readFileSync(file, 'utf8');
  const { module, errors } = parseSync(file, text);
  if (errors.length > 0) throw new Error(`${file}: ${errors[0]?.message}`);
  const found: { start: number; target: string }[] = [];
  for (const entry of module.staticImports) {
    found.push({ start: entry.start, target: entry.moduleRequest.value });
  }
  for (const entry of module.staticExports) {
    for (const part of entry.entries) {
      if (part.moduleRequest) found.push({ start: part.start, target: part.moduleRequest.value });
    }
  }
  for (const entry of module.dynamicImports) {
    const raw = text.slice(entry.moduleRequest.start, entry.moduleRequest.end);
    found.push({ start: entry.start, target: raw.replace(/^['"`]|['"`]$/g, '') });
  }
  return found.map(({ start, target }) => ({ file, line: text.slice(0, start).split('\n').length, target }));
}

function roomOf(file: string): string {
  return relative(source, file).split(sep)[0] ?? '';
}

/** What is wrong with one import, or null. */
function complaint(entry: Import): string | null {
  const from = roomOf(entry.file);
  const place = `${relative(source, entry.file)}:${entry.line}`;
  if (!entry.target.startsWith('.')) {
    const allowed = pure[from];
    if (allowed && !allowed.includes(entry.target))
      return `${place}: ${from}/ must not import ${entry.target}`;
    return null;
  }
  const to = roomOf(resolve(dirname(entry.file), entry.target));
  if (!rooms.includes(to)) return `${place}: ${entry.target} is in no room`;
  if (rooms.indexOf(to) > rooms.indexOf(from)) return `${place}: ${from}/ must not import from ${to}/`;
  if (to === 'simulate' && from === 'station') return `${place}: the agent must not need the simulator`;
  return null;
}

const files = readdirSync(source, { recursive: true, encoding: 'utf8' })
  .filter((name) => name.endsWith('.ts') && !name.endsWith('.d.ts'))
  .map((name) => join(source, name));

describe('the rooms of src/', () => {
  it('import only from rooms above them', () => {
    expect(files.length).toBeGreaterThan(20);
    expect(files.flatMap(importsOf).map(complaint).filter(Boolean)).toEqual([]);
  });

  it('are all on the list', () => {
    const folders = readdirSync(source, { withFileTypes: true }).filter((entry) => entry.isDirectory());
    expect(folders.map((entry) => entry.name).filter((name) => !rooms.includes(name))).toEqual([]);
  });

  it('would be caught importing downwards, or a package where only arithmetic belongs', () => {
    const at = (room: string) => join(source, room, 'x.ts');
    expect(complaint({ file: at('signal'), line: 1, target: '../store/x.ts' })).toMatch(
      /must not import from store/,
    );
    expect(complaint({ file: at('measure'), line: 1, target: 'node:fs' })).toMatch(/must not import node:fs/);
    expect(complaint({ file: at('station'), line: 1, target: '../simulate/x.ts' })).toMatch(/simulator/);
    expect(complaint({ file: at('cli'), line: 1, target: '../signal/x.ts' })).toBeNull();
  });
});
