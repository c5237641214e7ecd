/**
 * The sending side of the sensor link: COBS(frame) 00, where a frame is
 *   u8 version 1 | u8 kind | u16 node | u32 counter | body | u32 CRC-32C over all before it, little-endian,
 * and the body one of
 *   DESCRIBE 1: u32 rate in mHz, u8 channels, u8 format (1 i16, 2 i24), for each channel u8 unit, f32 scale and
 *               its name, then serial number and firmware (these three: u8 length and UTF-8)
 *   SAMPLES 2:  u64 index of the first sample, u16 n, n × channels counts
 *   HEALTH 3:   i16 temperature in 0.01 °C, u16 supply in mV, u32 over-range samples, u32 samples lost
 * It is written from the format alone and shares nothing with the receiver, so that each checks the other.
 */

import type { ChannelSettings } from './sensor.ts';

const kinds = { describe: 1, samples: 2, health: 3 } as const;
const unitCodes: Readonly<Record<ChannelSettings['unit'], number>> = { g: 1, 'm/s2': 2, logic: 3 };
/** A receiver drops a longer decoded frame as noise. */
const longestFrame = 8192;
const headBytes = 8;
const crcBytes = 4;
const samplesHeadBytes = 10;

export interface Description {
  readonly nominalRateHz: number;
  readonly bits: 16 | 24;
  readonly channels: readonly ChannelSettings[];
  readonly serialNumber: string;
  readonly firmware: string;
}

export interface NodeHealth {
  readonly temperatureC: number;
  readonly supplyV: number;
  readonly overRange: number;
  readonly lost: number;
}

const crcTable = Uint32Array.from({ length: 256 }, (_, byte) => {
  let crc = byte;
  for (let bit = 0; bit < 8; bit++) crc = crc & 1 ? (crc >>> 1) ^ 0x82f63b78 : crc >>> 1;
  return crc;
});

function crc32c(bytes: Uint8Array, length: number): number {
  let crc = 0xffffffff;
  for (let i = 0; i < length; i++) crc = (crc >>> 8) ^ crcTable[(crc ^ bytes[i]!) & 0xff]!;
  return ~crc >>> 0;
}

/** Consistent overhead byte stuffing (Cheshire and Baker 1999) of bytes[0..length), with the closing zero. */
export function stuff(bytes: Uint8Array, length: number): Uint8Array {
  const out = new Uint8Array(length + Math.ceil(length / 254) + 2);
  let codeAt = 0;
  let at = 1;
  for (let i = 0; i < length; i++) {
    const byte = bytes[i]!;
    if (byte !== 0) out[at++] = byte;
    const full = at - codeAt === 255;
    if (byte === 0 || (full && i + 1 < length)) {
      out[codeAt] = at - codeAt;
      codeAt = at++;
    }
  }
  out[codeAt] = at - codeAt;
  out[at++] = 0;
  return out.subarray(0, at);
}

/** The most samples of each channel that one SAMPLES frame can carry. */
export function mostSamples(channels: number, bits: 16 | 24): number {
  return Math.floor((longestFrame - headBytes - samplesHeadBytes - crcBytes) / (channels * (bits / 8)));
}

/** Makes the frames of one node, counting them. */
export class FrameEncoder {
  readonly #node: number;
  readonly #frame = Buffer.alloc(longestFrame);
  #counter = 0;

  constructor(node: number) {
    this.#node = node;
  }

  describe(description: Description): Uint8Array {
    const { channels, bits } = description;
    if (channels.length < 1 || channels.length > 8) {
      throw new RangeError(`frames: a node has 1 to 8 channels, not ${channels.length}`);
    }
    const frame = this.#frame;
    let at = frame.writeUInt32LE(Math.round(description.nominalRateHz * 1000), headBytes);
    at = frame.writeUInt8(channels.length, at);
    at = frame.writeUInt8(bits === 16 ? 1 : 2, at);
    for (const { name, unit, unitsPerCount } of channels) {
      at = frame.writeUInt8(unitCodes[unit], at);
      at = frame.writeFloatLE(unitsPerCount, at);
      at = this.#writeText(name, at);
    }
    at = this.#writeText(description.serialNumber, at);
    at = this.#writeText(description.firmware, at);
    return this.#close(kinds.describe, at);
  }

  /** @param counts n × channels, interleaved. */
  samples(firstIndex: number, counts: Int32Array, n: number, bits: 16 | 24): Uint8Array {
    const channels = counts.length / n;
    if (!Number.isInteger(channels) || n > mostSamples(channels, bits)) {
      throw new RangeError(`frames: ${counts.length} counts are no ${n} samples that fit one frame`);
    }
    const frame = this.#frame;
    let at = frame.writeUInt32LE(firstIndex % 2 ** 32, headBytes);
    at = frame.writeUInt32LE(Math.floor(firstIndex / 2 ** 32), at);
    at = frame.writeUInt16LE(n, at);
    for (let i = 0; i < counts.length; i++) {
      const count = counts[i]!;
      frame[at++] = count & 0xff;
      frame[at++] = (count >> 8) & 0xff;
      if (bits === 24) frame[at++] = (count >> 16) & 0xff;
    }
    return this.#close(kinds.samples, at);
  }

  health(health: NodeHealth): Uint8Array {
    const frame = this.#frame;
    let at = frame.writeInt16LE(Math.round(health.temperatureC * 100), headBytes);
    at = frame.writeUInt16LE(Math.round(health.supplyV * 1000), at);
    at = frame.writeUInt32LE(health.overRange % 2 ** 32, at);
    at = frame.writeUInt32LE(health.lost % 2 ** 32, at);
    return this.#close(kinds.health, at);
  }

  /** A restarted node counts its frames from 0 again. */
  restart(): void {
    this.#counter = 0;
  }

  #writeText(text: string, at: number): number {
    const bytes = Buffer.from(text, 'utf8');
    return this.#frame.writeUInt8(bytes.length, at) + bytes.copy(this.#frame, at + 1);
  }

  #close(kind: number, end: number): Uint8Array {
    const frame = this.#frame;
    frame.writeUInt8(1, 0);
    frame.writeUInt8(kind, 1);
    frame.writeUInt16LE(this.#node, 2);
    frame.writeUInt32LE(this.#counter, 4);
    this.#counter = (this.#counter + 1) >>> 0;
    frame.writeUInt32LE(crc32c(frame, end), end);
    return stuff(frame, end + crcBytes);
  }
}
