/** Checksums, framing and limits of formats against published vectors. A vector that must be met exactly counts as 0 bytes off. */
import { cobsDecode } from '../../src/link/cobs.ts';
import { crc32c } from '../../src/link/crc32c.ts';
import { type FlacFormat, readFlacHead } from '../../src/snapshot/flac-head.ts';
import type { OutsideCheck } from './outside-checks.ts';

const bytes = (length: number, value: (i: number) => number) =>
  Uint8Array.from({ length }, (_, i) => value(i));
const span = (from: number, to: number) => Array.from({ length: to - from + 1 }, (_, i) => from + i);

const crcChecks = (
  [
    ['digits', new TextEncoder().encode('123456789'), 0xe3069283],
    ['zeros', bytes(32, () => 0), 0x8a9136aa],
    ['ones', bytes(32, () => 0xff), 0x62a8ab43],
    ['rising', bytes(32, (i) => i), 0x46dd794e],
    ['falling', bytes(32, (i) => 31 - i), 0x113fdb5c],
  ] as const
).map(
  ([name, data, value]): OutsideCheck => ({
    id: `crc-32c.${name}`,
    source: 'RFC 3720 appendix B.4; catalogue of parametrised CRC algorithms',
    status: 'seen',
    value,
    tolerance: 0,
    unit: '',
    measure: () => crc32c(data),
  }),
);

const cobsTable: [string, number[], number[]][] = [
  ['one-zero', [0], [1, 1]],
  ['two-zeros', [0, 0], [1, 1, 1]],
  ['zero-inside', [0x11, 0x22, 0, 0x33], [3, 0x11, 0x22, 2, 0x33]],
  ['zeros-at-the-end', [0x11, 0, 0, 0], [2, 0x11, 1, 1, 1]],
  ['254-bytes', span(1, 254), [255, ...span(1, 254)]],
  ['zero-and-254-bytes', span(0, 254), [1, 255, ...span(1, 254)]],
  ['255-bytes', span(1, 255), [255, ...span(1, 254), 2, 255]],
];

const cobsChecks = cobsTable.map(
  ([name, plain, encoded]): OutsideCheck => ({
    id: `cobs.${name}`,
    source: 'Cheshire and Baker 1999, published examples',
    status: 'seen',
    value: 0,
    tolerance: 0,
    unit: 'bytes off',
    measure: () => {
      const into = new Uint8Array(encoded.length);
      const length = cobsDecode(Uint8Array.from(encoded), 0, encoded.length, into);
      const wrong = plain.filter((byte, i) => into[i] !== byte).length;
      return wrong + Math.abs(length - plain.length);
    },
  }),
);

/** A head with nothing but STREAMINFO, its fields as the RFC lays them out, written here bit by bit. */
function flacHead(rateHz: number, channels: number, bits: number, frames: bigint): FlacFormat {
  const info = [
    [16, 4096n],
    [16, 4096n],
    [24, 0n],
    [24, 0n],
    [20, BigInt(rateHz)],
    [3, BigInt(channels - 1)],
    [5, BigInt(bits - 1)],
    [36, frames],
    [128, 0n],
  ] as const;
  const binary = info.map(([width, value]) => value.toString(2).padStart(width, '0')).join('');
  const body = Array.from({ length: 34 }, (_, i) => Number.parseInt(binary.slice(8 * i, 8 * i + 8), 2));
  const head = Buffer.from([...Buffer.from('fLaC'), 0x80, 0, 0, 34, ...body]);
  return readFlacHead(head, (what) => {
    throw new Error(what);
  }).format;
}

const flacChecks = (
  [
    ['rate-max', 1_048_575, 'Hz', () => flacHead(1_048_575, 8, 32, 2n ** 36n - 1n).rateHz],
    ['channels-max', 8, '', () => flacHead(1_048_575, 8, 32, 2n ** 36n - 1n).channels],
    ['channels-min', 1, '', () => flacHead(1, 1, 4, 1n).channels],
    ['bits-max', 32, 'bit', () => flacHead(1_048_575, 8, 32, 2n ** 36n - 1n).bitsPerSample],
    ['bits-min', 4, 'bit', () => flacHead(1, 1, 4, 1n).bitsPerSample],
    ['samples-max', 2 ** 36 - 1, '', () => flacHead(1, 1, 4, 2n ** 36n - 1n).frames],
  ] as const
).map(
  ([name, value, unit, measure]): OutsideCheck => ({
    id: `flac.${name}`,
    source: 'RFC 9639, limits of the format',
    status: 'seen',
    value,
    tolerance: 0,
    unit,
    measure,
  }),
);

export const codingChecks: readonly OutsideCheck[] = [...crcChecks, ...cobsChecks, ...flacChecks];
