/**
 * Watches a stream of MQTT packets for those that are larger than agreed, before a parser collects them. A PUBLISH is
 * cut short, so that it is acknowledged in its turn and whoever takes it sees that it is too large; any other packet
 * is dropped. Either way the stream stays in step.
 * MQTT 5, 2.1: a byte of type and flags, then the remaining length in at most four bytes of seven bits.
 */
export class PacketGuard {
  readonly #maxBytes: number;
  readonly #oversized: () => void;
  /** The header under way; its bytes go on when the length is known. */
  #header: number[] = [];
  #length = 0;
  /** Bytes of the packet under way that still go on, and those after them that do not. */
  #keep = 0;
  #drop = 0;

  /** @param oversized told of each packet that is too large, at its header. */
  constructor(maxBytes: number, oversized: () => void) {
    this.#maxBytes = maxBytes;
    this.#oversized = oversized;
  }

  /** The bytes that may go on; null: the length of a packet does not end, and nothing after it can be made out. */
  filter(chunk: Buffer): Buffer | null {
    const pieces: Buffer[] = [];
    let at = 0;
    while (at < chunk.length) {
      if (this.#keep > 0) {
        const piece = chunk.subarray(at, at + this.#keep);
        pieces.push(piece);
        this.#keep -= piece.length;
        at += piece.length;
      } else if (this.#drop > 0) {
        const bytes = Math.min(this.#drop, chunk.length - at);
        this.#drop -= bytes;
        at += bytes;
      } else {
        const byte = chunk[at++]!;
        this.#header.push(byte);
        const bytes = this.#header.length;
        if (bytes === 1) continue;
        if (bytes > 5) return null;
        this.#length += (byte & 127) * 128 ** (bytes - 2);
        if (byte < 128) pieces.push(this.#begin());
      }
    }
    return pieces.length === 1 ? pieces[0]! : Buffer.concat(pieces);
  }

  /** The header that goes on. */
  #begin(): Buffer {
    const [type = 0, ...digits] = this.#header;
    const length = this.#length;
    this.#header = [];
    this.#length = 0;
    if (1 + digits.length + length <= this.#maxBytes) {
      this.#keep = length;
      return Buffer.from([type, ...digits]);
    }
    this.#oversized();
    const isPublish = type >> 4 === 3;
    this.#keep = isPublish ? this.#maxBytes - 5 : 0;
    this.#drop = length - this.#keep;
    return isPublish ? Buffer.from([type, ...lengthDigits(this.#keep)]) : Buffer.alloc(0);
  }
}

/** MQTT 5, 1.5.5: seven bits a byte, the lowest first, the highest bit where more follow. */
function lengthDigits(length: number): number[] {
  const rest = Math.floor(length / 128);
  return rest === 0 ? [length] : [(length % 128) + 128, ...lengthDigits(rest)];
}
