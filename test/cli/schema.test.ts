import { readFileSync } from 'node:fs';
import { expect, it } from 'vitest';
import { parse } from 'yaml';
import { z } from 'zod';
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

it('takes the sample stations, and refuses a key that is not known', () => {
  const folder = new URL('../../config/', import.meta.url);
  const schema = z.fromJSONSchema(JSON.parse(schemaText()));
  for (const name of ['minimal.yaml', 'two-pumps.yaml']) {
    const file: object = parse(readFileSync(new URL(name, folder), 'utf8'));
    expect(schema.safeParse(file).error?.issues ?? []).toEqual([]);
    expect(schema.safeParse({ ...file, alarm: [] }).success).toBe(false);
  }
});
