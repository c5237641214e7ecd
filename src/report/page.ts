/**
 * One frame of a FLAC stream to integer samples (RFC 9639, section 9): header with CRC-8, a subframe a channel
 * (constant, verbatim, fixed or linear prediction with a Rice-coded residual), CRC-16.
 *
 * Samples are held as Float64: they are integers of at most 33 bits, exact there, where the difference of two 32-bit
 * channels would not fit into 32.
 */

import { BitReader, crc8, crc16 } from './flac-bits.ts';

export interface FlacShape {
  channels: number;
  bitsPerSample: number;
}

export interface FlacFrame {
  samples: Float64Array[];
  /** Offset of the first byte after it. */
  end: number;
}

/** The frame contradicts the format; `message` says how. */
export class BadFrame extends Error {}

/** Table 14 of RFC 9639; 0 is reserved, 6 and 7 stand at the end of the header. */
const BLOCK_SIZES = [0, 192, 576, 1152, 2304, 4608, 0, 0, 256, 512, 1024, 2048, 4096, 8192, 16384, 32768];
const BIT_DEPTHS = [0, 8, 12, -1, 16, 20, 24, 32];
/** Predictions of the fixed orders 0 to 4: coefficients of the samples before, nearest first. */
const FIXED: readonly (readonly number[])[] = [[], [1], [2, -1], [3, -3, 1], [4, -6, 4, -1]];
const LEFT_SIDE = 8;
const SIDE_RIGHT = 9;
const MID_SIDE = 10;

/** @throws BadFrame, or EndOfBits where the bytes end within the frame. */
export function decodeFrame(bytes: Uint8Array, at: number, shape: FlacShape): FlacFrame {
  const bits = new BitReader(bytes, at);
  const header = readHeader(bits, shape);
  if (crc8(bytes.subarray(at, bits.at)) !== bits.unsigned(8))
    throw new BadFrame('its header fails its checksum');
  const { assignment, blockSize } = header;
  const samples: Float64Array[] = [];
  for (let channel = 0; channel < shape.channels; channel++) {
    const isSide =
      (channel === 1 && (assignment === LEFT_SIDE || assignment === MID_SIDE)) ||
      (channel === 0 && assignment === SIDE_RIGHT);
    samples.push(readSubframe(bits, blockSize, shape.bitsPerSample + (isSide ? 1 : 0)));
  }
  bits.align();
  const end = bits.at + 2;
  if (crc16(bytes.subarray(at, bits.at)) !== bits.unsigned(16)) throw new BadFrame('it fails its checksum');
  if (assignment >= LEFT_SIDE) joinStereo(samples, assignment);
  return { samples, end };
}

function readHeader(bits: BitReader, shape: FlacShape): { blockSize: number; assignment: number } {
  if (bits.unsigned(15) !== 0x7ffc) throw new BadFrame('no frame begins there');
  bits.unsigned(1);
  const sizeCode = bits.unsigned(4);
  const rateCode = bits.unsigned(4);
  const assignment = bits.unsigned(4);
  const depth = BIT_DEPTHS[bits.unsigned(3)]!;
  const channels = assignment < LEFT_SIDE ? assignment + 1 : 2;
  if (bits.unsigned(1) !== 0 || sizeCode === 0 || rateCode === 15 || assignment > MID_SIDE)
    throw new BadFrame('it uses reserved codes');
  if (channels !== shape.channels || (depth !== 0 && depth !== shape.bitsPerSample))
    throw new BadFrame('it has other channels or bits than the file says');
  const more = bits.unsigned(8);
  // The frame or sample number in the manner of UTF-8: frames are read in order, so it is passed over.
  const following = more < 0x80 ? 0 : Math.clz32(~(more << 24)) - 1;
  bits.unsigned(8 * Math.min(following, 3));
  bits.unsigned(8 * Math.max(0, following - 3));
  let blockSize = BLOCK_SIZES[sizeCode]!;
  if (sizeCode === 6) blockSize = bits.unsigned(8) + 1;
  if (sizeCode === 7) blockSize = bits.unsigned(16) + 1;
  if (rateCode === 12) bits.unsigned(8);
  if (rateCode === 13 || rateCode === 14) bits.unsigned(16);
  return { blockSize, assignment };
}

function readSubframe(bits: BitReader, n: number, withWasted: number): Float64Array {
  if (bits.unsigned(1) !== 0) throw new BadFrame('a subframe does not begin as one');
  const type = bits.unsigned(6);
  const wasted = bits.unsigned(1) === 1 ? bits.unary() + 1 : 0;
  const depth = withWasted - wasted;
  if (depth < 1) throw new BadFrame('a subframe has no bits left');
  const out = new Float64Array(n);
  if (type === 0) out.fill(bits.signed(depth));
  else if (type === 1) for (let i = 0; i < n; i++) out[i] = bits.signed(depth);
  else if (type >= 8 && type <= 12) {
    const coefficients = FIXED[type - 8]!;
    readWarmUp(bits, out, coefficients.length, depth);
    readResidual(bits, out, coefficients.length);
    predict(out, coefficients, 0);
  } else if (type >= 32) {
    const order = type - 31;
    readWarmUp(bits, out, order, depth);
    const precision = bits.unsigned(4) + 1;
    const shift = bits.signed(5);
    if (precision === 16 || shift < 0) throw new BadFrame('a subframe uses reserved codes');
    const coefficients = Array.from({ length: order }, () => bits.signed(precision));
    readResidual(bits, out, order);
    predict(out, coefficients, shift);
  } else throw new BadFrame('a subframe uses reserved codes');
  if (wasted > 0) for (let i = 0; i < n; i++) out[i]! *= 2 ** wasted;
  return out;
}

function readWarmUp(bits: BitReader, out: Float64Array, order: number, depth: number): void {
  if (order > out.length) throw new BadFrame('a subframe predicts from more samples than it has');
  for (let i = 0; i < order; i++) out[i] = bits.signed(depth);
}

function readResidual(bits: BitReader, out: Float64Array, order: number): void {
  const method = bits.unsigned(2);
  if (method > 1) throw new BadFrame('a residual uses reserved codes');
  const width = method === 0 ? 4 : 5;
  const escaped = 2 ** width - 1;
  const partitions = 2 ** bits.unsigned(4);
  const size = out.length / partitions;
  if (!Number.isInteger(size) || size < order) throw new BadFrame('a residual has impossible partitions');
  let at = order;
  for (let partition = 1; partition <= partitions; partition++) {
    const parameter = bits.unsigned(width);
    const end = partition * size;
    if (parameter === escaped) {
      const raw = bits.unsigned(5);
      for (; at < end; at++) out[at] = bits.signed(raw);
    } else {
      const scale = 2 ** parameter;
      for (; at < end; at++) {
        const folded = bits.unary() * scale + bits.unsigned(parameter);
        out[at] = folded % 2 === 0 ? folded / 2 : -(folded + 1) / 2;
      }
    }
  }
}

/** Adds what is predicted to the residual, in place. */
function predict(out: Float64Array, coefficients: readonly number[], shift: number): void {
  const order = coefficients.length;
  const scale = 2 ** -shift;
  for (let i = order; i < out.length; i++) {
    let sum = 0;
    for (let k = 0; k < order; k++) sum += coefficients[k]! * out[i - 1 - k]!;
    out[i]! += Math.floor(sum * scale);
  }
}

function joinStereo(samples: readonly Float64Array[], assignment: number): void {
  const [first, second] = [samples[0]!, samples[1]!];
  for (let i = 0; i < first.length; i++) {
    if (assignment === LEFT_SIDE) second[i] = first[i]! - second[i]!;
    else if (assignment === SIDE_RIGHT) first[i]! += second[i]!;
    else {
      const side = second[i]!;
      const sum = 2 * first[i]! + (side % 2 === 0 ? 0 : 1);
      first[i] = (sum + side) / 2;
      second[i] = (sum - side) / 2;
    }
  }
}
