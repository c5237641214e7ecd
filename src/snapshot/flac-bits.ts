/** Bits of a FLAC stream, most significant first, and the two checksums of its frames (RFC 9639, 9.1.8 and 9.3). */

/** A read beyond the end of the bytes. */
export class EndOfBits extends Error {}

export class BitReader {
  readonly #bytes: Uint8Array;
  #byte: number;
  #bit = 0;

  constructor(bytes: Uint8Array, at: number) {
    this.#bytes = bytes;
    this.#byte = at;
  }

  /** Offset of the next whole byte. */
  get at(): number {
    return this.#bit === 0 ? this.#byte : this.#byte + 1;
  }

  /** An unsigned number of 0 to 36 bits. */
  unsigned(bits: number): number {
    let value = 0;
    let left = bits;
    while (left > 0) {
      const byte = this.#current();
      const free = 8 - this.#bit;
      const take = Math.min(left, free);
      value = value * (1 << take) + ((byte >> (free - take)) & ((1 << take) - 1));
      left -= take;
      this.#bit += take;
      if (this.#bit === 8) {
        this.#bit = 0;
        this.#byte++;
      }
    }
    return value;
  }

  /** A number in two's complement. */
  signed(bits: number): number {
    if (bits === 0) return 0;
    const value = this.unsigned(bits);
    return value >= 2 ** (bits - 1) ? value - 2 ** bits : value;
  }

  /** How many zeros stand before the next one, which is taken too. */
  unary(): number {
    let zeros = 0;
    for (;;) {
      const rest = (this.#current() << this.#bit) & 0xff;
      if (rest !== 0) {
        const here = Math.clz32(rest) - 24;
        this.#bit += here + 1;
        if (this.#bit === 8) {
          this.#bit = 0;
          this.#byte++;
        }
        return zeros + here;
      }
      zeros += 8 - this.#bit;
      this.#bit = 0;
      this.#byte++;
    }
  }

  /** Leaves what remains of a byte begun. */
  align(): void {
    this.#byte = this.at;
    this.#bit = 0;
  }

  #current(): number {
    const byte = this.#bytes[this.#byte];
    if (byte === undefined) throw new EndOfBits('the stream ends inside a frame');
    return byte;
  }
}

/** Polynomial x^8 + x^2 + x + 1, from 0. */
export function crc8(bytes: Uint8Array): number {
  let register = 0;
  for (const byte of bytes) {
    register ^= byte;
    for (let bit = 0; bit < 8; bit++)
      register = (register & 0x80 ? (register << 1) ^ 0x07 : register << 1) & 0xff;
  }
  return register;
}

const table16 = Uint16Array.from({ length: 256 }, (_, index) => {
  let register = index << 8;
  for (let bit = 0; bit < 8; bit++) register = register & 0x8000 ? (register << 1) ^ 0x8005 : register << 1;
  return register & 0xffff;
});

/** Polynomial x^16 + x^15 + x^2 + 1, from 0. */
export function crc16(bytes: Uint8Array): number {
  let register = 0;
  for (const byte of bytes) register = ((register << 8) ^ table16[(register >> 8) ^ byte]!) & 0xffff;
  return register;
}
