/** The signal room against a general-purpose library: stored vectors everywhere, fresh ones where scipy is installed. */
import { execFileSync } from 'node:child_process';
import { randomInt } from 'node:crypto';
import { readFileSync, statSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { beforeAll, describe, expect, it } from 'vitest';
import { comparisons, type Vectors } from './against-scipy.ts';

const script = fileURLToPath(new URL('./make_vectors.py', import.meta.url));
const storedFile = fileURLToPath(new URL('./vectors/scipy.json', import.meta.url));
const stored = JSON.parse(readFileSync(storedFile, 'utf8')) as Vectors;

function pythonWithScipy(): string | null {
  for (const python of ['/usr/bin/python3', 'python3']) {
    try {
      execFileSync(python, ['-c', 'import scipy'], { stdio: 'ignore' });
      return python;
    } catch {
      // Not there or without scipy: the next one.
    }
  }
  return null;
}

const python = pythonWithScipy();
const names = Object.keys(comparisons);

describe('stored vectors', () => {
  it.each(names)('%s', (name) => {
    expect.hasAssertions();
    comparisons[name]!(stored);
  });

  it('are few enough to be kept in the repository', () => {
    expect(statSync(storedFile).size).toBeLessThan(1e6);
  });
});

if (python === null) {
  it('says that nothing was made afresh', () => {
    console.log('python3-scipy is not installed: compared with the stored vectors only, none made afresh');
    expect(stored.scipy).toMatch(/^\d+\.\d+/);
  });
} else {
  describe('fresh vectors', () => {
    const seed = Number(process.env.REFERENCE_SEED ?? randomInt(1, 1_000_000));
    let fresh: Vectors;

    beforeAll(() => {
      console.log(`fresh reference vectors: REFERENCE_SEED=${seed}`);
      const text = execFileSync(python, [script, '--seed', String(seed)], {
        encoding: 'utf8',
        maxBuffer: 8e6,
      });
      fresh = JSON.parse(text) as Vectors;
    });

    it.each(names)('%s', (name) => {
      expect.hasAssertions();
      expect(fresh.seed).toBe(seed);
      comparisons[name]!(fresh);
    });
  });
}
