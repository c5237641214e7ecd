/** YAML text to plain data and places: bounded in size, depth and aliases before anything recursive runs on it. */

import {
  type Document,
  isAlias,
  isMap,
  isScalar,
  isSeq,
  Lexer,
  LineCounter,
  type Node,
  type Pair,
  parseAllDocuments,
  parseDocument,
} from 'yaml';
import type { ConfigIssue } from './issues.ts';

const maxFileBytes = 65_536;
const maxDepth = 40;
const maxAliases = 100;

export type KeyPath = readonly (string | number)[];

export interface Place {
  readonly line: number;
  readonly column: number;
}

export interface ParsedText {
  readonly data: unknown;
  /** Where the value at a path stands, or the nearest parent that exists; `key`: where its key stands. */
  readonly locate: (path: KeyPath, key?: boolean) => Place;
  readonly issues: readonly ConfigIssue[];
}

export function parseYaml(text: string): ParsedText {
  const failed = (code: ConfigIssue['code'], message: string, place: Place = { line: 1, column: 1 }) => ({
    data: undefined,
    locate: () => place,
    issues: [{ code, path: [], message, key: false, place }],
  });
  const bytes = Buffer.byteLength(text, 'utf8');
  if (bytes > maxFileBytes) {
    return failed('config.too-large', `the file has ${bytes} bytes, at most ${maxFileBytes} are read`);
  }
  const deep = placeTooDeep(text);
  if (deep)
    return failed('config.too-large', `nested deeper than ${maxDepth} levels, a station needs 8`, deep);

  const lines = new LineCounter();
  const documents = parseAllDocuments(text, { lineCounter: lines, prettyErrors: false, logLevel: 'silent' });
  const at = (offset: number): Place => {
    const { line, col } = lines.linePos(offset);
    return { line: Math.max(1, line), column: Math.max(1, col) };
  };
  const [document = parseDocument(''), second]: Document.Parsed[] = documents;
  if (second) {
    const message = 'a second document begins here, one file describes one station; take the line --- out';
    return failed('config.syntax', message, at(second.range[0]));
  }
  const issues: ConfigIssue[] = document.errors.map((error) => ({
    code: error.code === 'DUPLICATE_KEY' ? 'config.duplicate-key' : 'config.syntax',
    path: [],
    message:
      error.code === 'DUPLICATE_KEY'
        ? 'this key stands twice in one map, keep one of them'
        : sentence(error.message),
    key: false,
    place: at(error.pos[0]),
  }));
  const locate = (path: KeyPath, key = false) => at(offsetOf(document, path, key));
  if (issues.some((issue) => issue.code === 'config.syntax')) return { data: undefined, locate, issues };
  try {
    // A copy through JSON: aliases share objects, and what follows takes wrong values out of the copy.
    const data: unknown = JSON.parse(JSON.stringify(document.toJS({ maxAliasCount: maxAliases })) ?? 'null');
    return { data, locate, issues };
  } catch (error) {
    const message = `${sentence(String((error as Error).message))}; write the values out instead of aliases`;
    return failed('config.syntax', message);
  }
}

/** The YAML library recurses once a level, and enough levels end the process: count them on the tokens first. */
function placeTooDeep(text: string): Place | null {
  let line = 1;
  let lineStart = 0;
  let offset = 0;
  let flow = 0;
  let inLine = 0;
  for (const token of new Lexer().lex(text)) {
    // Control tokens of the lexer mark document, scalar and flow starts and have no place in the text.
    if (token.length === 1 && token < '\t') continue;
    if (token === '[' || token === '{') flow++;
    else if (token === ']' || token === '}') flow--;
    else if (token === '-' || token === '?') inLine++;
    if (flow > maxDepth || inLine > maxDepth) return { line, column: offset - lineStart + 1 };
    for (let i = token.indexOf('\n'); i >= 0; i = token.indexOf('\n', i + 1)) {
      line++;
      lineStart = offset + i + 1;
      inLine = 0;
    }
    offset += token.length;
  }
  return null;
}

function offsetOf(document: Document.Parsed, path: KeyPath, key: boolean): number {
  let node: Node | null = document.contents;
  let offset = startOf(node) ?? 0;
  for (const [index, step] of path.entries()) {
    if (isAlias(node)) node = node.resolve(document) ?? null;
    let next: unknown;
    if (isMap(node)) {
      const pair = (node.items as Pair[]).find(
        (item) => isScalar(item.key) && String(item.key.value) === String(step),
      );
      if (!pair) return offset;
      const keyOffset = startOf(pair.key);
      if (key && index === path.length - 1) return keyOffset ?? offset;
      next = pair.value;
      offset = startOf(next) ?? keyOffset ?? offset;
    } else if (isSeq(node) && typeof step === 'number') {
      next = node.items[step];
      offset = startOf(next) ?? offset;
    } else {
      return offset;
    }
    node = (next ?? null) as Node | null;
  }
  return offset;
}

function startOf(node: unknown): number | undefined {
  return (node as { range?: [number, number, number] | null } | null)?.range?.[0];
}

function sentence(message: string): string {
  const first = message.split('\n')[0] ?? message;
  return first.charAt(0).toLowerCase() + first.slice(1);
}
