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
import { withoutWrong, wordIssues } from './schema-issues.ts';
import type { Station } from './station.ts';
import { parseYaml } from './yaml-text.ts';

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
  const issues: ConfigIssue[] = [...textIssues];
  const unusable = textIssues.some((issue) => issue.code !== 'config.duplicate-key');
  const parsed = unusable ? null : stationSchema.safeParse(data);
  if (parsed !== null) {
    const found = parsed.success ? [] : wordIssues(parsed.error.issues, data);
    const rest = withoutWrong(structuredClone(data), found);
    const report: Report = (code, path, message) => found.push({ code, path, message, key: false });
    for (const check of [checkBroker, checkLinks, checkMachines, checkRules]) check(rest, report);
    issues.push(...found);
  }
  if (issues.length > 0 || !parsed?.success) return { errors: placeIssues(issues, options.file, locate) };
  return { station: resolveStation(parsed.data, text, options.baseDir) };
}
