/**
 * Rows of the column format as samples with an index: lines counted from the first whole one. A malformed line is
 * one missing sample (at least; nobody can know better). After the line was cut, nobody knows how many are missing:
 * a new epoch begins.
 */

import { ColumnParser, type ColumnPlace } from './columns.ts';
import type { EpochCause } from './node-stream.ts';

const MAX_ROWS = 512;

export interface ColumnStreamHost {
  onEpoch(firstIndex: number, because: EpochCause): void;
  onGap(n: number): void;
  onSamples(planar: Int32Array, stride: number, n: number): void;
}

export class ColumnStream {
  readonly #parser: ColumnParser;
  readonly #host: ColumnStreamHost;
  readonly #scratch: Int32Array;
  readonly #channels: number;
  #rows = 0;
  #epochDue: EpochCause | null = 'first';

  constructor(places: readonly ColumnPlace[], host: ColumnStreamHost) {
    this.#host = host;
    this.#channels = places.length;
    this.#scratch = new Int32Array(places.length * MAX_ROWS);
    this.#parser = new ColumnParser(places, {
      onRow: (counts) => this.#row(counts),
      onBreak: () => this.#break(),
    });
  }

  /** Lines taken as samples. */
  rowsTaken = 0;

  get errors(): Readonly<Record<string, number>> {
    return this.#parser.errors;
  }

  push(chunk: Uint8Array): void {
    this.#parser.push(chunk);
    this.#flush();
  }

  reopened(): void {
    this.#parser.reset();
    this.#epochDue = this.#epochDue ?? 'reconnected';
  }

  #row(counts: Int32Array): void {
    if (this.#epochDue !== null) {
      this.#host.onEpoch(0, this.#epochDue);
      this.#epochDue = null;
    }
    for (let c = 0; c < this.#channels; c++) this.#scratch[c * MAX_ROWS + this.#rows] = counts[c]!;
    if (++this.#rows === MAX_ROWS) this.#flush();
  }

  #break(): void {
    this.#flush();
    if (this.#epochDue === null) this.#host.onGap(1);
  }

  #flush(): void {
    if (this.#rows === 0) return;
    const n = this.#rows;
    this.rowsTaken += n;
    this.#rows = 0;
    this.#host.onSamples(this.#scratch, MAX_ROWS, n);
  }
}
