/**
 * Constants broken on purpose, one at a time, as the sources are loaded and not in them: each must be caught by a check
 * against the outside.
 */
import { readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { createServer } from 'vite';
import { describe, expect, it } from 'vitest';
import type * as lists from './all-checks.ts';
import type * as checks from './outside-checks.ts';

const root = fileURLToPath(new URL('../..', import.meta.url));

const mutations: [what: string, file: string, from: string, to: string][] = [
  [
    'a window bandwidth 5 % too wide',
    'signal/window.ts',
    'square / window.length / (gain * gain)',
    '(1.05 * square) / window.length / (gain * gain)',
  ],
  ['the coefficients of another window', 'signal/window.ts', 'hann: [0.5, 0.5]', 'hann: [0.54, 0.46]'],
  ['one side of the spectrum lost', 'signal/spectrum.ts', '? scale : 2 * scale', '? scale : scale'],
  [
    'a factor √2 in velocity',
    'signal/integrate.ts',
    '((1000 * metresPerSecond2(unit)) / (2 * Math.PI)) ** 2',
    '2 * ((1000 * metresPerSecond2(unit)) / (2 * Math.PI)) ** 2',
  ],
  [
    'a factor √2 in displacement',
    'signal/integrate.ts',
    '((1e6 * metresPerSecond2(unit)) / (2 * Math.PI) ** 2) ** 2',
    '2 * ((1e6 * metresPerSecond2(unit)) / (2 * Math.PI) ** 2) ** 2',
  ],
  ['a factor √2 in the orders', 'measure/velocity.ts', '(line.amplitude / Math.SQRT2)', '(line.amplitude)'],
  ['g = 9.81', 'signal/integrate.ts', 'GRAVITY_M_S2 = 9.80665', 'GRAVITY_M_S2 = 9.81'],
  ['the envelope of one side', 'signal/envelope.ts', '(2 * short) / size', 'short / size'],
  ['the overall band from 12 Hz', 'measure/plan.ts', 'usual: 10, high: 1000', 'usual: 12, high: 1000'],
  [
    'the wrong sign in BPFO',
    'machine/bearing.ts',
    'bpfo: (elements * (1 - ratio)) / 2',
    'bpfo: (elements * (1 + ratio)) / 2',
  ],
  ['BSF counted twice', 'machine/bearing.ts', '(pitchOverElement / 2) *', 'pitchOverElement *'],
  ['a zone boundary off by 0.1', 'machine/severity.ts', 'mmS: [1.4, 2.8, 4.5]', 'mmS: [1.4, 2.9, 4.5]'],
  ['a boundary in the upper zone', 'machine/severity.ts', 'value > boundary)', 'value >= boundary)'],
  ['a trip limit of part 7', 'machine/severity.ts', 'tripMax: 10.6', 'tripMax: 10.7'],
  ['200 kW in the upper column', 'machine/severity.ts', 'choice.ratedKw <= PART', 'choice.ratedKw < PART'],
  ['an alarm rise of half of B/C', 'machine/severity.ts', 'baselineMmS + 0.25 *', 'baselineMmS + 0.5 *'],
  ['synchronous speed by pole pairs', 'machine/electrical.ts', '(2 * mainsHz) / poles', 'mainsHz / poles'],
];

/** Loads the product with one text replaced; gives the first check that fails, or null. */
async function firstFailure(file: string, from: string, to: string): Promise<string | null> {
  const path = `${root}src/${file}`;
  const server = await createServer({
    root,
    configFile: false,
    appType: 'custom',
    logLevel: 'error',
    optimizeDeps: { noDiscovery: true, include: [] },
    server: { middlewareMode: true, hmr: false, ws: false, watch: null },
    plugins: [
      {
        name: 'mutation',
        enforce: 'pre',
        transform: (code, id) => (id === path ? code.replace(from, to) : null),
      },
    ],
  });
  try {
    const { allChecks } = (await server.ssrLoadModule('/test/reference/all-checks.ts')) as typeof lists;
    const { runCheck } = (await server.ssrLoadModule('/test/reference/outside-checks.ts')) as typeof checks;
    return allChecks.find((check) => !runCheck(check).passed)?.id ?? null;
  } finally {
    await server.close();
  }
}

describe('a constant broken on purpose is caught by a check against the outside', () => {
  it.each(mutations)('%s', { timeout: 90_000 }, async (what, file, from, to) => {
    const source = readFileSync(`${root}src/${file}`, 'utf8');
    expect(source.split(from).length, `"${from}" stands once in ${file}`).toBe(2);
    const caught = await firstFailure(file, from, to);
    console.log(`${what}: caught by ${caught ?? 'nothing'}`);
    expect(caught).not.toBeNull();
  });

  it('and nothing is where nothing is broken', { timeout: 90_000 }, async () => {
    expect(await firstFailure('signal/window.ts', 'hann: [0.5, 0.5]', 'hann: [0.5, 0.5]')).toBeNull();
  });
});
