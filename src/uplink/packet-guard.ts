/**
 * Watches a stream of MQTT packets for one that announces more bytes than agreed, before a parser collects them.
 * MQTT 5, 2.1: a byte of type and flags, then the remaining length in at most four bytes of seven bits.
 */
export class PacketGuard {
  readonly #maxBytes: number;
  /** Bytes of the packet under way that are still to come; null: in its header. */
  #left: number | null = null;
  #headerBytes = 0;
  #length = 0;

  constructor(maxBytes: number) {
    this.#maxBytes = maxBytes;
  }

  /** False: the sender must be cut off. */
  accepts(chunk: Uint8Array): boolean {
    let at = 0;
    while (at < chunk.length) {
      if (this.#left !== null) {
        const step = Math.min(this.#left, chunk.length - at);
        at += step;
        this.#left -= step;
        if (this.#left === 0) this.#begin();
        continue;
      }
      const byte = chunk[at++]!;
      this.#headerBytes++;
      if (this.#headerBytes === 1) continue;
      if (this.#headerBytes > 5) return false;
      this.#length += (byte & 127) * 128 ** (this.#headerBytes - 2);
      if (this.#length + this.#headerBytes > this.#maxBytes) return false;
      if (byte >= 128) continue;
      if (this.#length === 0) this.#begin();
      else this.#left = this.#length;
    }
    return true;
  }

  #begin(): void {
    this.#left = null;
    this.#headerBytes = 0;
    this.#length = 0;
  }
}
