/**
 * A recording as PCM WAV with the same integer counts. WAV says neither unit nor scale, and only a whole rate: a JSON
 * file beside it does.
 *
 * Layout as in wav.ts. More than two channels or 16 bits call for the extensible format, with no channel positions.
 */

import type { Recording } from './recording.ts';
import type { SnapshotTags } from './tags.ts';

const BLOCK_FRAMES = 8192;
/** The sub-format PCM: its code, then the fixed rest of the GUID. */
const PCM_GUID = Buffer.from('0100000000001000800000aa00389b71', 'hex');

export function* wavChunks(recording: Recording): Generator<Buffer, void, void> {
  const { channels, frames, bitsPerSample } = recording;
  const width = Math.ceil(bitsPerSample / 8);
  yield wavHead(channels, recording.rateHz, bitsPerSample, frames);
  for (let at = 0; at < frames; at += BLOCK_FRAMES) {
    const counts = recording.read(at, Math.min(BLOCK_FRAMES, frames - at));
    const length = counts[0]!.length;
    const bytes = Buffer.alloc(length * channels * width);
    counts.forEach((channel, c) => {
      for (let i = 0; i < length; i++) bytes.writeIntLE(channel[i]!, (i * channels + c) * width, width);
    });
    yield bytes;
  }
  // Chunks are padded to even.
  if ((frames * channels * width) % 2 === 1) yield Buffer.alloc(1);
}

function wavHead(channels: number, rateHz: number, bits: number, frames: number): Buffer {
  const width = Math.ceil(bits / 8);
  const extensible = channels > 2 || width > 2;
  const formatBytes = extensible ? 40 : 16;
  const dataBytes = frames * channels * width;
  const head = Buffer.alloc(28 + formatBytes);
  head.write('RIFF', 0, 'latin1');
  head.writeUInt32LE(20 + formatBytes + dataBytes + (dataBytes % 2), 4);
  head.write('WAVEfmt ', 8, 'latin1');
  head.writeUInt32LE(formatBytes, 16);
  head.writeUInt16LE(extensible ? 0xfffe : 1, 20);
  head.writeUInt16LE(channels, 22);
  const whole = Math.max(1, Math.round(rateHz));
  head.writeUInt32LE(whole, 24);
  head.writeUInt32LE(whole * channels * width, 28);
  head.writeUInt16LE(channels * width, 32);
  head.writeUInt16LE(8 * width, 34);
  if (extensible) {
    head.writeUInt16LE(22, 36);
    head.writeUInt16LE(bits, 38);
    PCM_GUID.copy(head, 44);
  }
  head.write('data', 20 + formatBytes, 'latin1');
  head.writeUInt32LE(dataBytes, 24 + formatBytes);
  return head;
}

/** What the WAV file cannot say. */
export function wavSidecar(tags: SnapshotTags, bitsPerSample: number): string {
  const { channels, rate, nominalRateHz, start, clock, firstIndex, gaps, ...rest } = tags;
  const full = 2 ** (8 * Math.ceil(bitsPerSample / 8) - 1);
  const body = {
    snapshot: rest.id,
    site: rest.site,
    machines: rest.machines,
    start,
    start_clock: clock,
    first_index: firstIndex,
    rate: { hz: rate.hz, source: rate.source, ppm: rate.ppm, claimed_hz: nominalRateHz },
    link: rest.link,
    node_serial: rest.nodeSerial,
    shafts: rest.shafts,
    cause: rest.cause,
    alarms: rest.alarms,
    agent_version: rest.version,
    config: rest.config,
    channels: channels.map(({ name, points, unit, unitsPerCount }) => ({
      name,
      points,
      unit,
      units_per_count: unitsPerCount,
      full_scale: unitsPerCount * full,
    })),
    missing: gaps.map(({ at, samples }) => ({ at_sample: at, samples })),
  };
  return `${JSON.stringify(body, null, 2)}\n`;
}
