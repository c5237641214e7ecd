/** A station file to a station, or to all that is wrong with it. */

import { readFileSync } from 'node:fs';
import { dirname, resolve as resolvePath } from 'node:path';
import { checkBroker } from './check-broker.ts';
import { checkLinks } from './check-links.ts';
import { checkMachines } from './check-machines.ts';
import { checkRules } from './check-rules.ts';
import { ForebayError } from './errors.ts';
import { type ConfigIssue, issueLine, type PlacedIssue, placeIssues, type Report } from './issues.ts';
import { resolveStation } from './resolve.ts';
import { stationSchema } from './schema.ts';
import {
  asWritten,
  misspellings,
  respelled,
  type SchemaIssue,
  withoutWrong,
  wordIssues,
} from './schema-issues.ts';
import type { Station } from './station.ts';
import { type KeyPath, parseYaml } from './yaml-text.ts';

/** All mistakes of a station file; `message` has one line each. */
export class ConfigError extends ForebayError {
  readonly issues: readonly PlacedIssue[];

  constructor(file: string, issues: readonly PlacedIssue[]) {
    const count = issues.length === 1 ? 'one mistake' : `${issues.length} mistakes`;
    super('config.invalid', `${file} has ${count}:\n${issues.map(issueLine).join('\n')}`);
    this.name = 'ConfigError';
    this.issues = issues;
  }
}

/** @throws ForebayError where the file cannot be read, ConfigError where it has mistakes. */
export function loadStation(path: string): Station {
  let text: string;
  try {
    text = readFileSync(path, 'utf8');
  } catch (error) {
    throw new ForebayError('file.unreadable', `cannot read ${path}: ${(error as Error).message}`, {
      cause: error,
    });
  }
  const result = parseStation(text, { file: path, baseDir: dirname(resolvePath(path)) });
  if ('errors' in result) throw new ConfigError(path, result.errors);
  return result.station;
}

/** @param options `file` names the text in messages; relative paths in it are read against `baseDir`. */
export function parseStation(
  text: string,
  options: { readonly file: string; readonly baseDir: string },
): { readonly station: Station } | { readonly errors: readonly PlacedIssue[] } {
  const { data, locate, issues: textIssues } = parseYaml(text);
  if (textIssues.some((issue) => issue.code !== 'config.duplicate-key')) {
    return { errors: placeIssues(textIssues, options.file, locate) };
  }
  const parsed = stationSchema.safeParse(data);
  const { issues, misspelt } = mistakesOf(data, parsed.error?.issues ?? []);
  if (issues.length + textIssues.length > 0 || !parsed.success) {
    const place = (path: KeyPath, key: boolean) => locate(asWritten(path, misspelt), key);
    return { errors: placeIssues([...textIssues, ...issues], options.file, place) };
  }
  return { station: resolveStation(parsed.data, text, options.baseDir) };
}

/** What the schema found and what the checks find in the rest, misspelt keys read as what was meant. */
function mistakesOf(data: unknown, found: readonly SchemaIssue[]) {
  const misspelt = misspellings(found, data);
  const spelt = respelled(data, misspelt);
  const isMisspelt = (path: KeyPath) =>
    misspelt.some((wrong) => samePath([...wrong.parent, wrong.key], path));
  const isRespelled = (path: KeyPath) =>
    misspelt.some((wrong) => samePath([...wrong.parent, wrong.meant], path));
  const unknown = wordIssues(found, data).filter((issue) => isMisspelt(issue.path));
  const again = misspelt.length === 0 ? found : (stationSchema.safeParse(spelt).error?.issues ?? []);
  const schemaIssues = wordIssues(again, spelt);
  const issues: ConfigIssue[] = [
    ...unknown,
    // A key that was misspelt and holds a wrong value is one mistake: perhaps something else was meant.
    ...schemaIssues.filter((issue) => !isRespelled(issue.path) && !isMisspelt(issue.path)),
  ];
  const report: Report = (code, path, message, about = [path]) => {
    const wrongAlready = schemaIssues.some((issue) => about.some((place) => isWithin(issue.path, place)));
    if (!wrongAlready) issues.push({ code, path, message, key: false });
  };
  const rest = withoutWrong(structuredClone(spelt), schemaIssues);
  for (const check of [checkBroker, checkLinks, checkMachines, checkRules]) check(rest, report);
  return { issues, misspelt };
}

function isWithin(path: KeyPath, place: KeyPath): boolean {
  return place.every((step, index) => path[index] === step);
}

function samePath(a: KeyPath, b: KeyPath): boolean {
  return a.length === b.length && isWithin(a, b);
}
