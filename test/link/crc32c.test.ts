import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { crc32c } from '../../src/link/crc32c.ts';
import { plainCrc32c } from '../support/sender.ts';

const bytes = (length: number, value: (i: number) => number) =>
  Uint8Array.from({ length }, (_, i) => value(i));

describe('CRC-32C', () => {
  // RFC 3720 (iSCSI) appendix B.4, and the check value of the catalogue of parametrised CRC algorithms (CRC-32/ISCSI).
  it.each([
    ['the digits 1 to 9', new TextEncoder().encode('123456789'), 0xe3069283],
    ['32 bytes of zeros', bytes(32, () => 0), 0x8a9136aa],
    ['32 bytes of ones', bytes(32, () => 0xff), 0x62a8ab43],
    ['32 bytes rising', bytes(32, (i) => i), 0x46dd794e],
    ['32 bytes falling', bytes(32, (i) => 31 - i), 0x113fdb5c],
  ])('of %s is the published value', (_name, data, expected) => {
    expect(crc32c(data)).toBe(expected);
  });

  it('is that of the bitwise definition, whatever the length and place', () => {
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 70 }), fc.nat(8), fc.nat(8), (data, skip, cut) => {
        const start = Math.min(skip, data.length);
        const end = Math.max(start, data.length - cut);
        expect(crc32c(data, start, end)).toBe(plainCrc32c([...data.subarray(start, end)]));
      }),
      { seed: 20260302 },
    );
  });
});
