import { describe, expect, it } from 'vitest';
import { FrameEncoder, mostSamples, stuff } from '../../src/simulate/frames.ts';
import type { ChannelSettings } from '../../src/simulate/sensor.ts';

const hex = (bytes: Uint8Array) => Buffer.from(bytes).toString('hex');
const stuffed = (text: string) => hex(stuff(Buffer.from(text, 'hex'), text.length / 2));
const run = (from: number, to: number) =>
  Array.from({ length: to - from + 1 }, (_, k) => (from + k).toString(16).padStart(2, '0')).join('');

describe('the frame encoder', () => {
  it('makes the vectors of the sensor link, node 7, frames 0 to 2', () => {
    const channels: ChannelSettings[] = [
      { name: 'h', unit: 'g', unitsPerCount: 2 ** -12 },
      { name: 'tach', unit: 'logic', unitsPerCount: 1 },
    ];
    const encoder = new FrameEncoder(7);
    const description = {
      nominalRateHz: 40_960,
      bits: 16,
      channels,
      serialNumber: 'A1',
      firmware: '0.9',
    } as const;
    expect(hex(encoder.describe(description))).toBe(
      '04010107010101010101067102020101010680390168030113803f047461636802413103302e393ab48d3f00',
    );
    expect(hex(encoder.samples(0, Int32Array.of(0, 1, -1, 0, 256, 1), 3, 16))).toBe(
      '0401020702010101010101010101010102030101020103ffff0101030101055330a6b900',
    );
    expect(hex(encoder.health({ temperatureC: 21.5, supplyV: 4.98, overRange: 3, lost: 0 }))).toBe(
      '040103070202010106660874130301010101010105def892ef00',
    );
  });

  it('stuffs as Cheshire and Baker 1999 did, at every boundary of a run of 254', () => {
    expect(stuffed('00')).toBe('010100');
    expect(stuffed('0000')).toBe('01010100');
    expect(stuffed('11220033')).toBe('031122023300');
    expect(stuffed('11000000')).toBe('021101010100');
    expect(stuffed(run(1, 254))).toBe(`ff${run(1, 254)}00`);
    expect(stuffed(run(0, 254))).toBe(`01ff${run(1, 254)}00`);
    expect(stuffed(run(1, 255))).toBe(`ff${run(1, 254)}02ff00`);
  });

  it('sends 24-bit counts in three bytes, low byte first, and an index beyond 32 bits', () => {
    const frame = new FrameEncoder(1).samples(2 ** 40 + 5, Int32Array.of(-2, 0x123456), 1, 24);
    // Stuffed by hand from 01 02, 01 00, 00000000, 05 00 00 00 00 01 00 00, 01 00, feffff 563412, less the CRC:
    // a code before each run says how far the next zero is.
    expect(hex(frame)).toMatch(/^040102010101010102050101010201010201..feffff563412.{8,10}00$/);
  });

  it('counts its frames, and from 0 after a restart', () => {
    const encoder = new FrameEncoder(0x0101);
    // 257 °C is no temperature, but leaves no zero byte: the counter is all that changes before the CRC.
    const counter = () =>
      hex(encoder.health({ temperatureC: 2.57, supplyV: 0.257, overRange: 0, lost: 0 })).slice(0, 18);
    expect(counter()).toBe('050103010101010105');
    expect(counter()).toBe('060103010101010105');
    encoder.restart();
    expect(counter()).toBe('050103010101010105');
  });

  it('refuses what does not fit a frame of 8192 bytes, or no whole samples', () => {
    const encoder = new FrameEncoder(1);
    expect(mostSamples(3, 16)).toBe(1361);
    expect(() => encoder.samples(0, new Int32Array(3 * 1362), 1362, 16)).toThrow(/fit one frame/);
    expect(encoder.samples(0, new Int32Array(3 * 1361), 1361, 16).length).toBeGreaterThan(8000);
    expect(() => encoder.samples(0, new Int32Array(7), 3, 16)).toThrow(/fit one frame/);
    const description = { nominalRateHz: 1, bits: 16, serialNumber: 'x', firmware: 'y' } as const;
    expect(() => encoder.describe({ ...description, channels: [] })).toThrow(/1 to 8 channels/);
  });
});
