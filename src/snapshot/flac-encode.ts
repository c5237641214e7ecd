/**
 * Encodes counts as FLAC by libflacjs and rewrites the head of the stream, which the encoder leaves unfinished because
 * it cannot seek back: STREAMINFO gets its sizes, length and MD5, and our comments take the place of the encoder's.
 */

import Flac from 'libflacjs/dist/libflac.min.js';

export interface FlacInput {
  /** An array a channel, 1 to 8, of one length. */
  counts: readonly Int32Array[];
  bitsPerSample: 16 | 24;
  rateHz: number;
  /** `NAME=value` lines. */
  comments: readonly string[];
}

const COMPRESSION_LEVEL = 5;
const BLOCK_FRAMES = 4096;
/** What the encoder takes (libFLAC 1.3): whole hertz, above 65 535 only multiples of ten. */
const MAX_PLAIN_RATE_HZ = 65_535;
const MAX_RATE_HZ = 655_350;
const STREAMINFO_BYTES = 34;

/** Fewest bits, of those that the encoder and all readers know, that hold the counts; null: 24 do not. */
export function bitsFor(counts: readonly Int32Array[]): 16 | 24 | null {
  let [low, high] = [0, 0];
  for (const channel of counts) {
    for (const count of channel) {
      if (count < low) low = count;
      else if (count > high) high = count;
    }
  }
  for (const bits of [16, 24] as const) if (low >= -(2 ** (bits - 1)) && high < 2 ** (bits - 1)) return bits;
  return null;
}

/** The rate for the header: the nearest one that FLAC can say. */
export function headerRateHz(rateHz: number): number {
  const whole = Math.max(1, Math.round(rateHz));
  return whole <= MAX_PLAIN_RATE_HZ ? whole : Math.min(MAX_RATE_HZ, Math.round(rateHz / 10) * 10);
}

/** @throws RangeError where the encoder does not take the shape. */
export async function encodeFlac(input: FlacInput): Promise<Buffer> {
  await new Promise<void>((resolve) => (Flac.isReady() ? resolve() : Flac.on('ready', () => resolve())));
  const { counts, bitsPerSample } = input;
  const frames = counts[0]?.length ?? 0;
  const rateHz = headerRateHz(input.rateHz);
  const encoder = Flac.create_libflac_encoder(
    rateHz,
    counts.length,
    bitsPerSample,
    COMPRESSION_LEVEL,
    frames,
    false,
    BLOCK_FRAMES,
  );
  const chunks: Uint8Array[] = [];
  let info: Parameters<Parameters<typeof Flac.init_encoder_stream>[2]>[0];
  try {
    const write = (bytes: Uint8Array) => void chunks.push(bytes.slice());
    const status = Flac.init_encoder_stream(encoder, write, (found) => {
      info = found;
    });
    if (status !== 0)
      throw new RangeError(`FLAC: ${counts.length} channels at ${rateHz} Hz are not possible`);
    for (let at = 0; at < frames; at += BLOCK_FRAMES) {
      const block = interleaved(counts, at, Math.min(BLOCK_FRAMES, frames - at));
      if (!Flac.FLAC__stream_encoder_process_interleaved(encoder, block, block.length / counts.length))
        throw new RangeError(`FLAC: the encoder stopped (${Flac.FLAC__stream_encoder_get_state(encoder)})`);
    }
    Flac.FLAC__stream_encoder_finish(encoder);
  } finally {
    Flac.FLAC__stream_encoder_delete(encoder);
  }
  if (info === undefined) throw new RangeError('FLAC: the encoder did not finish');
  const stream = Buffer.concat(chunks);
  const streamInfo = Buffer.alloc(STREAMINFO_BYTES);
  streamInfo.writeUInt16BE(info.min_blocksize, 0);
  streamInfo.writeUInt16BE(info.max_blocksize, 2);
  streamInfo.writeUIntBE(info.min_framesize, 4, 3);
  streamInfo.writeUIntBE(info.max_framesize, 7, 3);
  const shape = (BigInt(rateHz) << 44n) | (BigInt(counts.length - 1) << 41n);
  streamInfo.writeBigUInt64BE(shape | (BigInt(bitsPerSample - 1) << 36n) | BigInt(frames), 10);
  streamInfo.write(info.md5sum, 18, 'hex');
  return Buffer.concat([
    Buffer.from('fLaC', 'latin1'),
    block(0, false, streamInfo),
    block(4, true, commentBlock(input.comments)),
    stream.subarray(framesAt(stream)),
  ]);
}

function interleaved(counts: readonly Int32Array[], first: number, frames: number): Int32Array {
  const out = new Int32Array(frames * counts.length);
  counts.forEach((channel, c) => {
    for (let i = 0; i < frames; i++) out[i * counts.length + c] = channel[first + i]!;
  });
  return out;
}

function block(type: number, last: boolean, body: Buffer): Buffer {
  const head = Buffer.alloc(4);
  head[0] = type | (last ? 0x80 : 0);
  head.writeUIntBE(body.length, 1, 3);
  return Buffer.concat([head, body]);
}

function commentBlock(comments: readonly string[]): Buffer {
  const counted = (text: string) => {
    const bytes = Buffer.from(text, 'utf8');
    const size = Buffer.alloc(4);
    size.writeUInt32LE(bytes.length);
    return Buffer.concat([size, bytes]);
  };
  const number = Buffer.alloc(4);
  number.writeUInt32LE(comments.length);
  return Buffer.concat([counted('Forebay, libFLAC by libflacjs'), number, ...comments.map(counted)]);
}

/** Where the frames begin, after the encoder's own metadata. */
function framesAt(stream: Buffer): number {
  let at = 4;
  for (;;) {
    const last = (stream[at]! & 0x80) !== 0;
    at += 4 + stream.readUIntBE(at + 1, 3);
    if (last) return at;
  }
}
