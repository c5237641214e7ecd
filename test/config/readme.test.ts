import { readFileSync } from 'node:fs';
import { expect, it } from 'vitest';
import { z } from 'zod';
import { stationSchema } from '../../src/config/schema.ts';

const page = readFileSync(new URL('../../config/README.md', import.meta.url), 'utf8');

interface Node {
  readonly properties?: Readonly<Record<string, Node>>;
  readonly items?: Node;
  readonly anyOf?: readonly Node[];
  readonly additionalProperties?: Node | boolean;
}

function keysOf(node: Node): string[] {
  const own = Object.entries(node.properties ?? {}).flatMap(([key, child]) => [key, ...keysOf(child)]);
  const rest = typeof node.additionalProperties === 'object' ? [node.additionalProperties] : [];
  const inner = [...(node.items ? [node.items] : []), ...(node.anyOf ?? []), ...rest];
  return [...own, ...inner.flatMap(keysOf)];
}

it('the page on the station file names every key of the schema', () => {
  const keys = [...new Set(keysOf(z.toJSONSchema(stationSchema, { io: 'input' }) as Node))];
  expect(keys.length).toBeGreaterThan(90);
  const missing = keys.filter((key) => !new RegExp(`[\`{., \\[(]${key}[\`:,.}]`).test(page));
  expect(missing).toEqual([]);
});
