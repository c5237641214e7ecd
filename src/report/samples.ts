/** Counts as a page carries them: every sample, or where there are too many, the extremes of each few. */

export interface PackedSamples {
  /** Samples that one entry stands for; 1: entries are the counts themselves, else pairs of lowest and highest. */
  readonly block: number;
  /** Little-endian, signed. */
  readonly bytesPerValue: 2 | 3 | 4;
  readonly base64: string;
}

/** Bytes of samples in one page: 15 s of 3 channels at 40 960 Hz take 3.7 MB of 16 bit and 5.5 MB of 24. */
export const MAX_SAMPLE_BYTES = 5_600_000;

/**
 * @param counts of one channel.
 * @param budgetBytes what this channel may take.
 * @returns `block` is the smallest power of two that keeps to the budget.
 */
export function packSamples(counts: Int32Array, budgetBytes: number): PackedSamples {
  const bytesPerValue = widthOf(counts);
  if (counts.length * bytesPerValue <= budgetBytes) {
    return { block: 1, bytesPerValue, base64: bytesOf(counts, bytesPerValue).toString('base64') };
  }
  let block = 4;
  while (Math.ceil(counts.length / block) * 2 * bytesPerValue > budgetBytes) block *= 2;
  const pairs = new Int32Array(2 * Math.ceil(counts.length / block));
  for (let k = 0, from = 0; from < counts.length; k += 2, from += block) {
    const part = counts.subarray(from, from + block);
    let low = part[0]!;
    let high = low;
    for (const count of part) {
      if (count < low) low = count;
      if (count > high) high = count;
    }
    pairs[k] = low;
    pairs[k + 1] = high;
  }
  return { block, bytesPerValue, base64: bytesOf(pairs, bytesPerValue).toString('base64') };
}

function widthOf(counts: Int32Array): 2 | 3 | 4 {
  let least = 0;
  let most = 0;
  for (const count of counts) {
    if (count < least) least = count;
    if (count > most) most = count;
  }
  if (least >= -(2 ** 15) && most < 2 ** 15) return 2;
  return least >= -(2 ** 23) && most < 2 ** 23 ? 3 : 4;
}

function bytesOf(values: Int32Array, width: number): Buffer {
  const bytes = Buffer.alloc(values.length * width);
  for (let i = 0, at = 0; i < values.length; i++) {
    let value = values[i]!;
    for (let byte = 0; byte < width; byte++) {
      bytes[at++] = value & 0xff;
      value >>= 8;
    }
  }
  return bytes;
}

export function packFloats(values: Float32Array): string {
  return Buffer.from(values.buffer, values.byteOffset, values.byteLength).toString('base64');
}
