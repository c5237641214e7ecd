/**
 * The column format: text lines, one sample of all channels a line, numbers separated by comma, semicolon, tab or
 * spaces, `#` for comments. Bytes in whatever pieces they arrive, rows of counts out.
 *
 * A number becomes a count without passing through binary fractions: counts = round(value × 10^decimals), halves
 * away from zero. The first line after a (re)connection may be the tail of one, which looks like any other; it is
 * left out. A line with more or fewer columns than the ones before it is two lines run together or half a one.
 */

export interface ColumnPlace {
  readonly column: number;
  readonly decimals: number;
}

export interface ColumnHost {
  /** One sample of every channel; the array is reused for the next. */
  onRow(counts: Int32Array): void;
  /** A malformed line: at least one sample is missing here. */
  onBreak(): void;
}

const MAX_LINE_BYTES = 1024;
/** So many lines in a row that agree on another number of columns are right, and the one before them was not. */
const COLUMNS_ADOPTED_AFTER = 8;
const MAX_INT32 = 2 ** 31 - 1;
/** Digits that a number holds exactly. */
const MAX_EXACT_DIGITS = 15;

const LF = 0x0a;
const CR = 0x0d;
const TAB = 0x09;
const SPACE = 0x20;
const HASH = 0x23;
const COMMA = 0x2c;
const SEMICOLON = 0x3b;
const MINUS = 0x2d;
const PLUS = 0x2b;
const POINT = 0x2e;

/** round(value × 10^decimals) of the decimal number text[start..end), or NaN where it is none or does not fit. */
export function parseCounts(text: Uint8Array, start: number, end: number, decimals: number): number {
  let at = start;
  const negative = text[at] === MINUS;
  if (negative || text[at] === PLUS) at++;
  let mantissa = 0;
  let digits = 0;
  let significant = 0;
  let fraction = 0;
  let point = false;
  for (; at < end; at++) {
    const byte = text[at]!;
    if (byte >= 0x30 && byte <= 0x39) {
      digits++;
      if (significant > 0 || byte !== 0x30) significant++;
      if (significant > MAX_EXACT_DIGITS) {
        // What such digits behind the point say is below any converter's step; before it, the number is too large.
        if (!point) return Number.NaN;
        continue;
      }
      mantissa = mantissa * 10 + (byte - 0x30);
      if (point) fraction++;
    } else if (byte === POINT && !point) point = true;
    else if ((byte === 0x65 || byte === 0x45) && digits > 0) break;
    else return Number.NaN;
  }
  if (digits === 0) return Number.NaN;
  let shift = decimals - fraction;
  if (at < end) {
    const exponent = parseExponent(text, at + 1, end);
    if (Number.isNaN(exponent)) return Number.NaN;
    shift += exponent;
  }
  const magnitude = shift >= 0 ? mantissa * 10 ** shift : Math.round(mantissa / 10 ** -shift);
  if (!(magnitude <= MAX_INT32)) return Number.NaN;
  return negative && magnitude !== 0 ? -magnitude : magnitude;
}

function parseExponent(text: Uint8Array, start: number, end: number): number {
  let at = start;
  const negative = text[at] === MINUS;
  if (negative || text[at] === PLUS) at++;
  if (at >= end || end - at > 3) return Number.NaN;
  let value = 0;
  for (; at < end; at++) {
    const digit = text[at]! - 0x30;
    if (digit < 0 || digit > 9) return Number.NaN;
    value = value * 10 + digit;
  }
  return negative ? -value : value;
}

/** Cuts a byte stream into rows of counts. */
export class ColumnParser {
  /** Why lines were dropped here. */
  readonly errors = { 'line-too-long': 0, 'malformed-line': 0, 'column-count': 0 };
  readonly #places: readonly ColumnPlace[];
  readonly #host: ColumnHost;
  readonly #counts: Int32Array;
  readonly #line = new Uint8Array(MAX_LINE_BYTES);
  #held = 0;
  #tooLong = false;
  #synchronised = false;
  /** 0: not known yet. */
  #columns = 0;
  #otherColumns = 0;
  #otherColumnsRun = 0;
  /** Where the fields of the line at hand begin and end, for the columns that are asked for. */
  readonly #fields: Int32Array;

  constructor(places: readonly ColumnPlace[], host: ColumnHost) {
    this.#places = places;
    this.#host = host;
    this.#counts = new Int32Array(places.length);
    this.#fields = new Int32Array(2 * (1 + Math.max(0, ...places.map((place) => place.column))));
  }

  push(chunk: Uint8Array): void {
    let from = 0;
    while (from < chunk.length) {
      const lf = chunk.indexOf(LF, from);
      const end = lf < 0 ? chunk.length : lf;
      if (this.#held + end - from > MAX_LINE_BYTES) this.#tooLong = true;
      if (lf < 0) {
        this.#keep(chunk, from, end);
        return;
      }
      if (this.#held === 0 && !this.#tooLong) this.#endLine(chunk, from, end);
      else {
        this.#keep(chunk, from, end);
        this.#endLine(this.#line, 0, this.#held);
      }
      this.#held = 0;
      this.#tooLong = false;
      from = lf + 1;
    }
  }

  /** Forgets a half-received line and waits for the next whole one: what follows comes from a new connection. */
  reset(): void {
    this.#held = 0;
    this.#tooLong = false;
    this.#synchronised = false;
    this.#columns = 0;
    this.#otherColumnsRun = 0;
  }

  #keep(chunk: Uint8Array, from: number, end: number): void {
    if (this.#tooLong) return;
    this.#line.set(chunk.subarray(from, end), this.#held);
    this.#held += end - from;
  }

  #endLine(text: Uint8Array, start: number, lineEnd: number): void {
    if (!this.#synchronised) {
      this.#synchronised = true;
      return;
    }
    if (this.#tooLong) {
      this.errors['line-too-long']++;
      this.#host.onBreak();
      return;
    }
    let end = lineEnd;
    if (end > start && text[end - 1] === CR) end--;
    let from = start;
    while (from < end && text[from] === SPACE) from++;
    while (end > from && text[end - 1] === SPACE) end--;
    if (from === end || text[from] === HASH) return;
    const columns = this.#split(text, from, end);
    if (!this.#columnsAgree(columns)) {
      this.errors['column-count']++;
      this.#host.onBreak();
      return;
    }
    for (let c = 0; c < this.#places.length; c++) {
      const { column, decimals } = this.#places[c]!;
      const counts =
        column < columns
          ? parseCounts(text, this.#fields[2 * column]!, this.#fields[2 * column + 1]!, decimals)
          : Number.NaN;
      if (Number.isNaN(counts)) {
        this.errors['malformed-line']++;
        this.#host.onBreak();
        return;
      }
      this.#counts[c] = counts;
    }
    if (this.#columns === 0) this.#columns = columns;
    this.#host.onRow(this.#counts);
  }

  #columnsAgree(columns: number): boolean {
    if (this.#columns === 0 || columns === this.#columns) {
      this.#otherColumnsRun = 0;
      return true;
    }
    this.#otherColumnsRun = columns === this.#otherColumns ? this.#otherColumnsRun + 1 : 1;
    this.#otherColumns = columns;
    if (this.#otherColumnsRun < COLUMNS_ADOPTED_AFTER) return false;
    this.#columns = columns;
    return true;
  }

  /** How many columns the line has; spaces about a comma, semicolon or tab belong to it. */
  #split(text: Uint8Array, start: number, end: number): number {
    let columns = 0;
    let at = start;
    for (;;) {
      const fieldStart = at;
      while (at < end && !isSeparator(text[at]!)) at++;
      if (2 * columns < this.#fields.length) {
        this.#fields[2 * columns] = fieldStart;
        this.#fields[2 * columns + 1] = at;
      }
      columns++;
      while (at < end && text[at] === SPACE) at++;
      if (at >= end) return columns;
      if (isSeparator(text[at]!)) at++;
      while (at < end && text[at] === SPACE) at++;
    }
  }
}

function isSeparator(byte: number): boolean {
  return byte === COMMA || byte === SPACE || byte === TAB || byte === SEMICOLON;
}
