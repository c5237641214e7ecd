/** What the schema finds, in words; and the data without what it found, for the checks that go on. */

import type { z } from 'zod';
import { type ConfigIssue, nearest, suggestion } from './issues.ts';
import { type LooseStationFile, stationSchema } from './schema.ts';
import type { KeyPath } from './yaml-text.ts';

export type SchemaIssue = z.core.$ZodIssue;

export function wordIssues(issues: readonly SchemaIssue[], data: unknown): ConfigIssue[] {
  return issues.flatMap((issue) => wordIssue(issue, data, []));
}

function wordIssue(issue: SchemaIssue, data: unknown, prefix: KeyPath): ConfigIssue[] {
  const path = [...prefix, ...(issue.path as KeyPath)];
  const value = valueAt(data, path);
  const wanted = `expected: ${descriptionAt(path)}`;
  const wrong = (message: string): ConfigIssue[] => [
    { code: 'config.wrong-value', path, message, key: false },
  ];
  switch (issue.code) {
    case 'unrecognized_keys':
      return issue.keys.map((key) => unknownKey([...path, key], key, data));
    case 'invalid_union': {
      const chosen = issue.errors.find((option) => !option.some((inner) => isOtherKind(inner)));
      if (chosen) return chosen.flatMap((inner) => wordIssue(inner, data, path));
      return value === undefined ? [missing(path)] : wrong(`is ${shown(value)}, ${wanted}`);
    }
    case 'invalid_key':
      return [
        { code: 'config.wrong-value', path, message: 'is not a name of 1 to 255 characters', key: true },
      ];
    case 'custom':
      return wrong(`is ${shown(value)}, ${issue.message}`);
    case 'invalid_value': {
      if (value === undefined) return [missing(path)];
      const values = issue.values.map(String);
      const near = typeof value === 'string' && values.length > 2 ? suggestion(value, values) : '';
      return wrong(`is ${shown(value)}, ${near.startsWith(', did') ? near.slice(2) : wanted}`);
    }
    default: {
      if (value === undefined) return [missing(path)];
      const quote = typeof value === 'number' && issue.code === 'invalid_type' && issue.expected === 'string';
      return wrong(`is ${shown(value)}, ${wanted}${quote ? '; a number in quotes is text' : ''}`);
    }
  }
}

/** Whether an option of a union was not meant at all. */
function isOtherKind(issue: SchemaIssue): boolean {
  return issue.path.length === 0 && (issue.code === 'invalid_type' || issue.code === 'invalid_value');
}

function missing(path: KeyPath): ConfigIssue {
  const message = `is missing, expected: ${descriptionAt(path)}`;
  return { code: 'config.missing-key', path, message, key: false };
}

function unknownKey(path: KeyPath, key: string, data: unknown): ConfigIssue {
  if (isSecret(key)) {
    const message =
      'a secret is never written in this file, name a file that holds it by broker.password_file';
    return { code: 'config.secret', path, message, key: true };
  }
  const known = absentKeys(path.slice(0, -1), data);
  return {
    code: 'config.unknown-key',
    path,
    message: `is not a known key${suggestion(key, known)}`,
    key: true,
  };
}

/** A key that is not known, and the one that was meant. */
export interface Misspelling {
  readonly parent: KeyPath;
  readonly key: string;
  readonly meant: string;
}

/** The unknown keys that are near a known one which is not there. */
export function misspellings(issues: readonly SchemaIssue[], data: unknown): Misspelling[] {
  return issues.flatMap((issue) => {
    if (issue.code !== 'unrecognized_keys') return [];
    const parent = issue.path as KeyPath;
    const known = absentKeys(parent, data);
    return issue.keys.flatMap((key) => {
      const meant = isSecret(key) ? null : nearest(key, known);
      return meant === null ? [] : [{ parent, key, meant }];
    });
  });
}

/** A copy in which each misspelt key has its right name, so that what stands under it is checked too. */
export function respelled(data: unknown, wrong: readonly Misspelling[]): unknown {
  const copy = structuredClone(data);
  for (const { parent, key, meant } of wrong) {
    const map = valueAt(copy, parent) as Record<string, unknown>;
    if (meant in map) continue;
    map[meant] = map[key];
    delete map[key];
  }
  return copy;
}

/** A path of the respelled data as it stands in the text. */
export function asWritten(path: KeyPath, wrong: readonly Misspelling[]): KeyPath {
  const at = (misspelling: Misspelling) => [...misspelling.parent, misspelling.meant].join('\0');
  return path.map((step, index) => {
    const here = path.slice(0, index + 1).join('\0');
    return wrong.find((misspelling) => at(misspelling) === here)?.key ?? step;
  });
}

/** Takes out of `data` what the issues say is wrong. What is left has the right types. */
export function withoutWrong(data: unknown, issues: readonly ConfigIssue[]): LooseStationFile {
  for (const { path } of issues) {
    const parent = valueAt(data, path.slice(0, -1));
    const key = path.at(-1);
    if (key === undefined || typeof parent !== 'object' || parent === null) continue;
    if (Array.isArray(parent)) parent[Number(key)] = undefined;
    else delete (parent as Record<string, unknown>)[key];
  }
  return typeof data === 'object' && data !== null && !Array.isArray(data) ? (data as LooseStationFile) : {};
}

function valueAt(data: unknown, path: KeyPath): unknown {
  let value = data;
  for (const key of path) {
    if (typeof value !== 'object' || value === null || !Object.hasOwn(value, key)) return undefined;
    value = (value as Record<string, unknown>)[key];
  }
  return value;
}

function shown(value: unknown): string {
  if (value === null) return 'empty';
  if (Array.isArray(value) && !value.every((item) => typeof item === 'number')) return 'a list';
  if (typeof value === 'object' && !Array.isArray(value)) return 'a map of keys';
  const text = JSON.stringify(value);
  return text.length > 60 ? `${text.slice(0, 57)}…` : text;
}

interface Step {
  readonly schema: z.core.$ZodType;
  readonly description: string | undefined;
}

/** The schema at a path, through optional, default and union wrappers. */
function schemaAt(path: KeyPath): Step {
  let step = unwrap(stationSchema);
  for (const key of path) {
    const def = step.schema._zod.def as unknown as {
      shape?: Record<string, z.core.$ZodType>;
      element?: z.core.$ZodType;
      valueType?: z.core.$ZodType;
    };
    const next = def.shape?.[key] ?? def.element ?? def.valueType;
    if (!next) return step;
    step = unwrap(next);
  }
  return step;
}

function unwrap(schema: z.core.$ZodType): Step {
  let inner = schema;
  let description: string | undefined;
  for (;;) {
    description ??= (inner as z.ZodType).description;
    const def = inner._zod.def as unknown as {
      innerType?: z.core.$ZodType;
      options?: z.core.$ZodType[];
      type: string;
    };
    const object = def.options?.find((option) => option._zod.def.type === 'object');
    const next = def.innerType ?? object;
    if (!next) return { schema: inner, description };
    inner = next;
  }
}

function descriptionAt(path: KeyPath): string {
  const step = schemaAt(path);
  const type = step.schema._zod.def.type;
  const kinds: Record<string, string> = {
    object: 'a map of keys',
    array: 'a list',
    boolean: 'true or false',
  };
  const kind = kinds[type];
  if (step.description === undefined) return kind ?? `a ${type}`;
  return kind === undefined ? step.description : `${kind} (${step.description})`;
}

function isSecret(key: string): boolean {
  return /pass(word|phrase)?$|secret|token/i.test(key) && !key.endsWith('_file');
}

/** Keys that may stand at a path and do not. */
function absentKeys(path: KeyPath, data: unknown): string[] {
  const present = (valueAt(data, path) ?? {}) as object;
  const def = schemaAt(path).schema._zod.def as unknown as { shape?: Record<string, unknown> };
  return Object.keys(def.shape ?? {}).filter((key) => !Object.hasOwn(present, key));
}
