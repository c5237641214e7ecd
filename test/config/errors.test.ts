import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import { errorCatalogue, ForebayError } from '../../src/config/errors.ts';

const page = readFileSync(new URL('../../config/ERRORS.md', import.meta.url), 'utf8');
const documented = [...page.matchAll(/^\| `([a-z-]+\.[a-z-]+)` +\|/gm)].map((match) => match[1]);

describe('the catalogue of errors', () => {
  it('has each code of the page, and the page each code, once', () => {
    expect(documented.toSorted()).toEqual(Object.keys(errorCatalogue).toSorted());
  });

  it('gives an error its fix', () => {
    const error = new ForebayError('config.secret', 'station.yaml:3:1 broker.password: …');
    expect(error.fix).toContain('password_file');
    expect(error.code).toBe('config.secret');
  });
});
