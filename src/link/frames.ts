/**
 * The frames of the sensor link, version 1, from decoded bytes to values. Little-endian throughout.
 *
 *   0 u8 version (1)   1 u8 kind   2 u16 node   4 u32 counter   8 … body   end−4 u32 CRC-32C of all before it
 *
 * Nothing here remembers anything: whether samples make sense is for the node's stream to judge.
 */

import { crc32c } from './crc32c.ts';

const VERSION = 1;
const BODY_AT = 8;
const CRC_BYTES = 4;
const KIND_DESCRIBE = 1;
const KIND_SAMPLES = 2;
const KIND_HEALTH = 3;
const MAX_CHANNELS = 8;

export type SampleUnit = 'g' | 'm/s2' | 'logic';
export type SampleFormat = 'i16' | 'i24';

interface DescribedChannel {
  readonly name: string;
  readonly unit: SampleUnit;
  readonly unitsPerCount: number;
}

export interface DescribeFrame {
  readonly kind: 'describe';
  readonly node: number;
  readonly counter: number;
  readonly rateHz: number;
  readonly format: SampleFormat;
  readonly channels: readonly DescribedChannel[];
  readonly serialNumber: string;
  readonly firmware: string;
}

export interface SamplesFrame {
  readonly kind: 'samples';
  readonly node: number;
  readonly counter: number;
  /** Index of the first sample since the node started; null: beyond what a number holds exactly (2^53). */
  readonly firstIndex: number | null;
  /** Samples per channel. */
  readonly n: number;
  /** Interleaved counts as sent: a view that holds until the next frame. */
  readonly payload: Uint8Array;
}

export interface HealthFrame {
  readonly kind: 'health';
  readonly node: number;
  readonly counter: number;
  readonly temperatureC: number;
  readonly supplyV: number;
  readonly overRangeSamples: number;
  readonly lostSamples: number;
}

type FrameError = 'short' | 'crc' | 'version' | 'unknown-kind' | 'length' | 'describe';

export type Frame =
  | DescribeFrame
  | SamplesFrame
  | HealthFrame
  | { readonly kind: 'error'; readonly cause: FrameError };

const ERRORS = Object.fromEntries(
  (['short', 'crc', 'version', 'unknown-kind', 'length', 'describe'] as const).map((cause) => [
    cause,
    Object.freeze({ kind: 'error', cause }),
  ]),
) as unknown as Record<FrameError, Frame>;

/** Decodes one frame, checksum included; anything wrong comes back as `error` with its cause. */
export function decodeFrame(frame: Uint8Array): Frame {
  const bodyEnd = frame.length - CRC_BYTES;
  if (bodyEnd < BODY_AT) return ERRORS.short;
  const view = new DataView(frame.buffer, frame.byteOffset, frame.length);
  if (view.getUint32(bodyEnd, true) !== crc32c(frame, 0, bodyEnd)) return ERRORS.crc;
  if (frame[0] !== VERSION) return ERRORS.version;
  const node = view.getUint16(2, true);
  const counter = view.getUint32(4, true);
  switch (frame[1]) {
    case KIND_DESCRIBE:
      return decodeDescribe(frame, view, bodyEnd, node, counter);
    case KIND_SAMPLES:
      return decodeSamples(frame, view, bodyEnd, node, counter);
    case KIND_HEALTH:
      if (bodyEnd - BODY_AT !== 12) return ERRORS.length;
      return {
        kind: 'health',
        node,
        counter,
        temperatureC: view.getInt16(8, true) / 100,
        supplyV: view.getUint16(10, true) / 1000,
        overRangeSamples: view.getUint32(12, true),
        lostSamples: view.getUint32(16, true),
      };
    default:
      return ERRORS['unknown-kind'];
  }
}

function decodeSamples(
  frame: Uint8Array,
  view: DataView,
  bodyEnd: number,
  node: number,
  counter: number,
): Frame {
  const payloadAt = BODY_AT + 10;
  if (bodyEnd <= payloadAt) return ERRORS.length;
  const n = view.getUint16(16, true);
  if (n === 0) return ERRORS.length;
  const firstIndex = view.getUint32(8, true) + view.getUint32(12, true) * 2 ** 32;
  const exact = Number.isSafeInteger(firstIndex + n);
  return {
    kind: 'samples',
    node,
    counter,
    firstIndex: exact ? firstIndex : null,
    n,
    payload: frame.subarray(payloadAt, bodyEnd),
  };
}

const UNITS: readonly (SampleUnit | undefined)[] = [undefined, 'g', 'm/s2', 'logic'];
const FORMATS: readonly (SampleFormat | undefined)[] = [undefined, 'i16', 'i24'];
const utf8 = new TextDecoder('utf-8', { fatal: true });

function decodeDescribe(
  frame: Uint8Array,
  view: DataView,
  bodyEnd: number,
  node: number,
  counter: number,
): Frame {
  let at = BODY_AT + 6;
  if (bodyEnd < at) return ERRORS.length;
  const rateHz = view.getUint32(8, true) / 1000;
  const channelCount = frame[12]!;
  const format = FORMATS[frame[13]!];
  if (rateHz === 0 || channelCount < 1 || channelCount > MAX_CHANNELS || !format) return ERRORS.describe;

  /** null where the bytes run out or are no UTF-8. */
  const text = (): string | null => {
    if (at >= bodyEnd) return null;
    const end = at + 1 + frame[at]!;
    if (end > bodyEnd) return null;
    try {
      return utf8.decode(frame.subarray(at + 1, end));
    } catch {
      return null;
    } finally {
      at = end;
    }
  };

  const channels: DescribedChannel[] = [];
  for (let c = 0; c < channelCount; c++) {
    if (at + 5 > bodyEnd) return ERRORS.length;
    const unit = UNITS[frame[at]!];
    const unitsPerCount = view.getFloat32(at + 1, true);
    at += 5;
    const name = text();
    if (name === null) return ERRORS.length;
    const usable = Number.isFinite(unitsPerCount) && unitsPerCount !== 0;
    if (!unit || !usable || name === '' || channels.some((other) => other.name === name))
      return ERRORS.describe;
    channels.push({ name, unit, unitsPerCount });
  }
  const serialNumber = text();
  const firmware = text();
  if (serialNumber === null || firmware === null || at !== bodyEnd) return ERRORS.length;
  return { kind: 'describe', node, counter, rateHz, format, channels, serialNumber, firmware };
}
