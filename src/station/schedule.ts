/**
 * When the records of one point are due. Records start at multiples of the interval on the node's own sample index,
 * so the same counts are cut into the same records live and in replay. Sizes are in samples.
 */

export interface RecordSpan {
  /** Index of the record's first sample. */
  first: number;
  samples: number;
}

export class RecordSchedule {
  readonly #stepSamples: number;
  readonly #recordSamples: number;
  #next: number;
  /** Records given up because they were overwritten before they could be measured. */
  skipped = 0;

  /** @param firstIndex the oldest sample that can be had. */
  constructor(stepSamples: number, recordSamples: number, firstIndex: number) {
    if (!(Number.isSafeInteger(stepSamples) && stepSamples > 0 && recordSamples > 0)) {
      throw new RangeError(`a schedule needs whole positive sizes, not ${stepSamples} and ${recordSamples}`);
    }
    this.#stepSamples = stepSamples;
    this.#recordSamples = recordSamples;
    this.#next = this.#multipleFrom(firstIndex);
  }

  /** Where the next record begins. */
  get next(): number {
    return this.#next;
  }

  /**
   * The records that have become complete, oldest first.
   * @param head index after the newest sample.
   * @param oldest index of the oldest sample still held: records that begin before it are counted and left out.
   */
  due(head: number, oldest: number): RecordSpan[] {
    if (this.#next < oldest) {
      const from = this.#multipleFrom(oldest);
      this.skipped += (from - this.#next) / this.#stepSamples;
      this.#next = from;
    }
    const spans: RecordSpan[] = [];
    while (this.#next + this.#recordSamples <= head) {
      spans.push({ first: this.#next, samples: this.#recordSamples });
      this.#next += this.#stepSamples;
    }
    return spans;
  }

  #multipleFrom(index: number): number {
    return Math.ceil(index / this.#stepSamples) * this.#stepSamples;
  }
}
