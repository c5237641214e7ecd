/** A PCM WAV file of the given counts, an array a channel. */
export function wavBytes(channels: readonly Int32Array[], rateHz: number, bits: 16 | 24 | 32): Buffer {
  const width = bits / 8;
  const frames = channels[0]?.length ?? 0;
  const bytes = Buffer.alloc(44 + frames * channels.length * width);
  bytes.write('RIFF', 0, 'latin1');
  bytes.writeUInt32LE(bytes.length - 8, 4);
  bytes.write('WAVEfmt ', 8, 'latin1');
  bytes.writeUInt32LE(16, 16);
  bytes.writeUInt16LE(1, 20);
  bytes.writeUInt16LE(channels.length, 22);
  bytes.writeUInt32LE(rateHz, 24);
  bytes.writeUInt32LE(rateHz * channels.length * width, 28);
  bytes.writeUInt16LE(channels.length * width, 32);
  bytes.writeUInt16LE(bits, 34);
  bytes.write('data', 36, 'latin1');
  bytes.writeUInt32LE(frames * channels.length * width, 40);
  let at = 44;
  for (let frame = 0; frame < frames; frame++) {
    for (const counts of channels) {
      bytes.writeIntLE(counts[frame] ?? 0, at, width);
      at += width;
    }
  }
  return bytes;
}
