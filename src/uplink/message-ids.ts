/**
 * Numbers for messages. The store says at start where to go on; a number is safe to send once a commit holding it, or
 * `nextN`, is on the disk.
 */
export class MessageIds {
  readonly storeId: string;
  #nextN: number;

  constructor(storeId: string, nextN: number) {
    this.storeId = storeId;
    this.#nextN = nextN;
  }

  get nextN(): number {
    return this.#nextN;
  }

  take(): number {
    return this.#nextN++;
  }

  /** The first of `count` numbers in a row. */
  takeBlock(count: number): number {
    const first = this.#nextN;
    this.#nextN += count;
    return first;
  }

  /** `<store>-<n>`. */
  idOf(n: number): string {
    return `${this.storeId}-${n}`;
  }
}
