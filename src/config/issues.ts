/** A mistake in a station file, and its one line for a person. */

import type { ErrorCode } from './errors.ts';
import type { KeyPath, Place } from './yaml-text.ts';

export interface ConfigIssue {
  readonly code: Extract<ErrorCode, `config.${string}`>;
  readonly path: KeyPath;
  /** What is wrong, what would be right. */
  readonly message: string;
  /** true: the key itself is wrong, and not its value. */
  readonly key: boolean;
  /** Known already where the text could not be turned into data. */
  readonly place?: Place;
}

export interface PlacedIssue {
  readonly code: ConfigIssue['code'];
  readonly file: string;
  readonly line: number;
  readonly column: number;
  /** Dotted; empty for the file as a whole. */
  readonly path: string;
  readonly message: string;
}

/**
 * Takes the mistakes that a check finds. `about`: where what is missing would stand; where the schema has found
 * a mistake there already, it is wrong and not missing.
 */
export type Report = (
  code: ConfigIssue['code'],
  path: KeyPath,
  message: string,
  about?: readonly KeyPath[],
) => void;

/** In file order, each once. */
export function placeIssues(
  issues: readonly ConfigIssue[],
  file: string,
  locate: (path: KeyPath, key: boolean) => Place,
): PlacedIssue[] {
  const placed = issues.map((issue) => {
    const { line, column } = issue.place ?? locate(issue.path, issue.key);
    return { code: issue.code, file, line, column, path: issue.path.join('.'), message: issue.message };
  });
  const seen = new Set<string>();
  return placed
    .filter((issue) => {
      const text = issueLine(issue);
      return !seen.has(text) && seen.add(text);
    })
    .sort((a, b) => a.line - b.line || a.column - b.column);
}

/** `FILE:LINE:COLUMN key.path: what is wrong, what would be right`. */
export function issueLine(issue: PlacedIssue): string {
  const subject = issue.path === '' ? 'file' : issue.path;
  return `${issue.file}:${issue.line}:${issue.column} ${subject}: ${issue.message}`;
}

/** The nearest of the known words, as `, did you mean …?`, or what is known. */
export function suggestion(word: string, known: readonly string[]): string {
  const near = nearest(word, known);
  if (near !== null) return `, did you mean ${near}?`;
  if (known.length === 0) return ', there is none';
  const shown = known.slice(0, 12).join(', ');
  return `, known: ${shown}${known.length > 12 ? ', …' : ''}`;
}

/** The known word within two fifths of the length in edits, or one that begins alike; null: none is near. */
export function nearest(word: string, known: readonly string[]): string | null {
  let best: string | null = null;
  let bestDistance = Math.max(1, Math.round(0.4 * word.length)) + 1;
  for (const candidate of known) {
    const distance = editDistance(word.slice(0, 64), candidate.slice(0, 64));
    if (distance < bestDistance) [best, bestDistance] = [candidate, distance];
  }
  const alike = (a: string, b: string) => a.length >= 3 && b.startsWith(a);
  return best ?? known.find((candidate) => alike(word, candidate) || alike(candidate, word)) ?? null;
}

/** Levenshtein distance. */
function editDistance(a: string, b: string): number {
  let row = Array.from({ length: b.length + 1 }, (_, j) => j);
  for (let i = 1; i <= a.length; i++) {
    const next = [i];
    for (let j = 1; j <= b.length; j++) {
      const replaced = row[j - 1]! + (a[i - 1] === b[j - 1] ? 0 : 1);
      next.push(Math.min(replaced, row[j]! + 1, next[j - 1]! + 1));
    }
    row = next;
  }
  return row[b.length]!;
}
