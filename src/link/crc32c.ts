/**
 * CRC-32C (Castagnoli), as in RFC 3720 appendix B.4: reflected polynomial 0x82F63B78, initial value and final
 * exclusive-or of all ones. Eight tables take eight bytes a step ("slicing by 8").
 */

const POLYNOMIAL = 0x82f63b78;

function makeTables(): Int32Array[] {
  const first = new Int32Array(256);
  for (let byte = 0; byte < 256; byte++) {
    let crc = byte;
    for (let bit = 0; bit < 8; bit++) crc = crc & 1 ? (crc >>> 1) ^ POLYNOMIAL : crc >>> 1;
    first[byte] = crc;
  }
  const tables = [first];
  for (let k = 1; k < 8; k++) {
    const before = tables[k - 1]!;
    tables.push(before.map((crc) => (crc >>> 8) ^ first[crc & 0xff]!));
  }
  return tables;
}

const [T0, T1, T2, T3, T4, T5, T6, T7] = makeTables() as [
  Int32Array,
  Int32Array,
  Int32Array,
  Int32Array,
  Int32Array,
  Int32Array,
  Int32Array,
  Int32Array,
];

/**
 * CRC-32C of bytes[start..end), as an unsigned number.
 *
 * Worked number: of the ASCII digits "123456789" it is 0xE3069283.
 */
export function crc32c(bytes: Uint8Array, start = 0, end = bytes.length): number {
  let crc = -1;
  let i = start;
  for (const whole = end - 7; i < whole; i += 8) {
    crc =
      T7[(crc ^ bytes[i]!) & 0xff]! ^
      T6[((crc >>> 8) ^ bytes[i + 1]!) & 0xff]! ^
      T5[((crc >>> 16) ^ bytes[i + 2]!) & 0xff]! ^
      T4[(crc >>> 24) ^ bytes[i + 3]!]! ^
      T3[bytes[i + 4]!]! ^
      T2[bytes[i + 5]!]! ^
      T1[bytes[i + 6]!]! ^
      T0[bytes[i + 7]!]!;
  }
  for (; i < end; i++) crc = (crc >>> 8) ^ T0[(crc ^ bytes[i]!) & 0xff]!;
  return ~crc >>> 0;
}
