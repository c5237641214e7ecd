import type { SampleFormat } from './frames.ts';

export function bytesPerCount(format: SampleFormat): number {
  return format === 'i16' ? 2 : 3;
}

/** The counts at which a converter of this format is at its limit. */
export function countRangeOf(format: SampleFormat): readonly [number, number] {
  return format === 'i16' ? [-32768, 32767] : [-8388608, 8388607];
}

/**
 * Interleaved little-endian counts to one stretch a channel: channel c of sample k goes to into[c × stride + k].
 * `payload` holds n × channels counts.
 */
export function unpackCounts(
  payload: Uint8Array,
  format: SampleFormat,
  channels: number,
  n: number,
  into: Int32Array,
  stride: number,
): void {
  if (format === 'i16' && payload.byteOffset % 2 === 0) {
    // All platforms that Node runs on as a gateway are little-endian, as the link is.
    const counts = new Int16Array(payload.buffer, payload.byteOffset, n * channels);
    for (let c = 0; c < channels; c++) {
      for (let from = c, to = c * stride, end = to + n; to < end; to++, from += channels)
        into[to] = counts[from]!;
    }
    return;
  }
  const bytes = bytesPerCount(format);
  const step = bytes * channels;
  // The two high bytes carry the sign; a third one below them is the low byte of i24.
  const low = bytes - 2;
  for (let c = 0; c < channels; c++) {
    let from = c * bytes;
    for (let to = c * stride, end = to + n; to < end; to++, from += step) {
      const high = ((payload[from + low]! << 16) | (payload[from + low + 1]! << 24)) >> 16;
      into[to] = low === 0 ? high : (high << 8) | payload[from]!;
    }
  }
}
