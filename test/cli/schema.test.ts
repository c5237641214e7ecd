import { readFileSync } from 'node:fs';
import { expect, it } from 'vitest';
import { schemaText } from '../../src/cli/schema.ts';

it('the committed JSON Schema is the generated one (forebay schema > config/station.schema.json)', () => {
  const committed = readFileSync(new URL('../../config/station.schema.json', import.meta.url), 'utf8');
  expect(committed).toBe(schemaText());
});

it('refuses unknown keys and asks for the keys without a default', () => {
  const schema = JSON.parse(schemaText());
  expect(schema.additionalProperties).toBe(false);
  expect(schema.required).toEqual(['site', 'links', 'machines']);
  expect(schema.properties.measure.properties.velocity.properties.fmax_hz.default).toBe(1000);
});
