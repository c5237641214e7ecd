/**
 * The head of a FLAC file (RFC 9639, section 8): `fLaC`, then metadata blocks of a flag and type byte, a u24 size and
 * that many bytes. STREAMINFO says the shape; VORBIS_COMMENT holds lines of text. What follows are frames.
 */

import type { FlacShape } from './flac-frame.ts';

export interface FlacFormat extends FlacShape {
  /** As the header says: whole hertz. */
  rateHz: number;
  /** Samples per channel. 0: not known when the file was begun. */
  frames: number;
}

/** `NAME=value` lines by name in upper case; of a repeated name the first. */
export type Comments = ReadonlyMap<string, string>;

export interface FlacHead {
  format: FlacFormat;
  comments: Comments;
  framesAt: number;
}

type Fail = (what: string) => never;

const STREAMINFO = 0;
const VORBIS_COMMENT = 4;
const STREAMINFO_BYTES = 34;

/** @param fail throws, told what is wrong. */
export function readFlacHead(bytes: Buffer, fail: Fail): FlacHead {
  if (bytes.toString('latin1', 0, 4) !== 'fLaC') fail('does not begin as a FLAC file');
  let format: FlacFormat | null = null;
  let comments: Comments = new Map();
  let at = 4;
  for (let last = false; !last; ) {
    if (at + 4 > bytes.length) fail('ends within its metadata');
    last = (bytes[at]! & 0x80) !== 0;
    const type = bytes[at]! & 0x7f;
    const length = bytes.readUIntBE(at + 1, 3);
    const body = bytes.subarray(at + 4, at + 4 + length);
    if (body.length < length) fail('ends within its metadata');
    if (type === STREAMINFO) format = readStreamInfo(body, fail);
    if (type === VORBIS_COMMENT) comments = readComments(body, fail);
    at += 4 + length;
  }
  return { format: format ?? fail('has no STREAMINFO block'), comments, framesAt: at };
}

/** Sizes (10 bytes), rate in 20 bits, channels − 1 in 3, bits − 1 in 5, samples in 36, MD5 (16 bytes). */
function readStreamInfo(body: Buffer, fail: Fail): FlacFormat {
  if (body.length !== STREAMINFO_BYTES) fail(`has a STREAMINFO block of ${body.length} bytes instead of 34`);
  const packed = body.readBigUInt64BE(10);
  return {
    rateHz: Number(packed >> 44n),
    channels: Number((packed >> 41n) & 7n) + 1,
    bitsPerSample: Number((packed >> 36n) & 31n) + 1,
    frames: Number(packed & 0xfffffffffn),
  };
}

/** u32 size and vendor, u32 number of comments, each with a u32 size; little-endian, unlike the rest of the file. */
function readComments(body: Buffer, fail: Fail): Comments {
  const comments = new Map<string, string>();
  let at = 0;
  const number = () => {
    if (at + 4 > body.length) fail('has comments that are cut short');
    at += 4;
    return body.readUInt32LE(at - 4);
  };
  const text = () => {
    const length = number();
    if (at + length > body.length) fail('has comments that are cut short');
    at += length;
    return body.toString('utf8', at - length, at);
  };
  text();
  for (let left = number(); left > 0; left--) {
    const line = text();
    const equals = line.indexOf('=');
    const name = line.slice(0, Math.max(0, equals)).toUpperCase();
    if (name !== '' && !comments.has(name)) comments.set(name, line.slice(equals + 1));
  }
  return comments;
}
