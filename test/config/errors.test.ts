import { readdirSync, readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import { errorCatalogue, ForebayError } from '../../src/config/errors.ts';

const page = readFileSync(new URL('../../config/ERRORS.md', import.meta.url), 'utf8');
const documented = [...page.matchAll(/^\| `([a-z-]+\.[a-z-]+)` +\|/gm)].map((match) => match[1]);

describe('the catalogue of errors', () => {
  it('has each code of the page, and the page each code, once', () => {
    expect(documented.toSorted()).toEqual(Object.keys(errorCatalogue).toSorted());
  });

  it('has no code that nothing reports', () => {
    const folder = new URL('../../src/', import.meta.url);
    const code = readdirSync(folder, { recursive: true, encoding: 'utf8' })
      .filter((name) => name.endsWith('.ts') && name !== 'config/errors.ts')
      .map((name) => readFileSync(new URL(name, folder), 'utf8'))
      .join('\n');
    expect(Object.keys(errorCatalogue).filter((key) => !code.includes(`'${key}'`))).toEqual([]);
  });

  it('gives an error its fix', () => {
    const error = new ForebayError('config.secret', 'station.yaml:3:1 broker.password: …');
    expect(error.fix).toContain('password_file');
    expect(error.code).toBe('config.secret');
  });
});
