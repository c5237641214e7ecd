/** Seeded damage: something good, cut, changed, doubled and mixed, since pure noise never gets past the first check. */
import fc from 'fast-check';

/** Short in continuous integration; `FUZZ_RUNS=1000000` for whoever has the time. */
const total = Number(process.env.FUZZ_RUNS ?? 30_000);

/** This target's part of all runs. */
export const runs = (share: number): number => Math.max(1, Math.round(total * share));

/** A test may take as long as its runs do; something that hangs is still found. */
export const timeout = 60_000 + total * 2;

export const seed = 20_261_201;

type Edit =
  | { do: 'set' | 'flip' | 'insert'; at: number; value: number }
  | { do: 'delete' | 'double'; at: number; length: number }
  | { do: 'cut'; at: number };

const place = fc.nat(1_000_000);
const edit: fc.Arbitrary<Edit> = fc.oneof(
  fc.record({
    do: fc.constantFrom('set' as const, 'flip' as const, 'insert' as const),
    at: place,
    value: fc.oneof(fc.nat(255), fc.constantFrom(0, 1, 127, 128, 255)),
  }),
  fc.record({ do: fc.constantFrom('delete' as const, 'double' as const), at: place, length: fc.nat(40) }),
  fc.record({ do: fc.constant('cut' as const), at: place }),
);

function apply(from: Uint8Array, edits: readonly Edit[]): Uint8Array<ArrayBuffer> {
  let bytes = Uint8Array.from(from);
  for (const change of edits) {
    const at = bytes.length === 0 ? 0 : change.at % bytes.length;
    switch (change.do) {
      case 'set':
        bytes[at] = change.value;
        break;
      case 'flip':
        bytes[at] = (bytes[at] ?? 0) ^ (1 << (change.value & 7));
        break;
      case 'insert':
        bytes = Uint8Array.from([...bytes.subarray(0, at), change.value, ...bytes.subarray(at)]);
        break;
      case 'delete':
        bytes = Uint8Array.from([...bytes.subarray(0, at), ...bytes.subarray(at + change.length)]);
        break;
      case 'double':
        bytes = Uint8Array.from([...bytes.subarray(0, at + change.length), ...bytes.subarray(at)]);
        break;
      case 'cut':
        bytes = bytes.slice(0, at);
    }
  }
  return bytes;
}

/** One of the good ones with some damage, or noise. */
export function damaged(good: readonly Uint8Array[], noise = 200): fc.Arbitrary<Uint8Array> {
  return fc.oneof(
    {
      weight: 9,
      arbitrary: fc
        .tuple(fc.nat(good.length - 1), fc.array(edit, { maxLength: 6 }))
        .map(([which, edits]) => apply(good[which]!, edits)),
    },
    { weight: 1, arbitrary: fc.uint8Array({ maxLength: noise }) },
  );
}

/** Cuts the bytes into pieces, as a serial port hands them over. */
export function* pieces(bytes: Uint8Array, sizes: readonly number[]): Generator<Uint8Array> {
  let at = 0;
  for (let i = 0; at < bytes.length; i++) {
    const size = 1 + (sizes[i % Math.max(1, sizes.length)] ?? bytes.length);
    yield bytes.subarray(at, at + size);
    at += size;
  }
}
