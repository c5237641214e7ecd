import { describe, expect, it } from 'vitest';
import { bearingMultiples } from '../../src/machine/bearing.ts';
import {
  type DemoRecording,
  demoBearing,
  demoRecordings,
  type RenderedRecording,
  renderRecording,
} from '../../src/simulate/recordings.ts';
import { lineAt, peakGOf, rms } from './dft.ts';

const shaftHz = 1480 / 60;
const multiples = bearingMultiples(demoBearing)!;
const rendered = new Map<string, DemoRecording & RenderedRecording>();
for (const recording of demoRecordings())
  rendered.set(recording.id, { ...recording, ...renderRecording(recording) });

/** One channel in g. */
function channel(id: string, name: string): Float64Array {
  const { channels, counts } = rendered.get(id)!;
  const at = channels.findIndex((one) => one.name === name);
  const width = channels.length;
  return Float64Array.from(
    { length: counts.length / width },
    (_, i) => counts[i * width + at]! * channels[at]!.unitsPerCount,
  );
}

const mmS = (id: string, name: string, hz: number) =>
  lineAt(channel(id, name), rendered.get(id)!.rateHz, hz).amplitude / peakGOf(1, hz);

/** Depth of the modulation of the power at a frequency. */
function depth(id: string, hz: number): number {
  const x = channel(id, 'h');
  const power = x.map((g) => g * g);
  const mean = power.reduce((sum, p) => sum + p, 0) / power.length;
  return lineAt(
    power.map((p) => p / mean - 1),
    rendered.get(id)!.rateHz,
    hz,
  ).amplitude;
}

describe('the recordings of the demo data', () => {
  it('are a dozen, each with a name and a sentence, none at the limit of its converter', () => {
    expect(rendered.size).toBe(12);
    for (const { id, text, counts, rateHz, seconds } of rendered.values()) {
      expect(id).toMatch(/^[a-z-]{1,32}$/);
      expect(text).toMatch(/\.$/);
      expect(counts.length).toBe(3 * rateHz * seconds);
      expect(counts.reduce((most, count) => Math.max(most, Math.abs(count)), 0)).toBeLessThan(32_767);
      expect(counts.some((count) => count !== 0)).toBe(true);
    }
  });

  it('come out the same bit for bit, and each unlike the others', () => {
    const [first, second] = demoRecordings();
    expect(renderRecording(first!).counts).toEqual(rendered.get(first!.id)!.counts);
    expect(renderRecording(second!).counts.subarray(0, 999)).not.toEqual(
      rendered.get(first!.id)!.counts.subarray(0, 999),
    );
  });

  it('show each fault of the rotor where it belongs, well above the sound machine', () => {
    const places: [string, string, number, number][] = [
      ['unbalance', 'h', shaftHz, 5],
      ['misalignment', 'a', 2 * shaftHz, 8],
      ['looseness', 'v', 0.5 * shaftHz, 5],
      ['looseness', 'v', 6.5 * shaftHz, 10],
      ['resonance', 'h', 6 * shaftHz, 5],
      ['electrical', 'h', 100, 10],
    ];
    for (const [id, name, hz, times] of places) {
      expect(mmS(id, name, hz) / mmS('healthy', name, hz), `${id} at ${hz} Hz`).toBeGreaterThan(times);
    }
  });

  it('show each bearing defect at its own rate, where the sound machine has nothing', () => {
    // The cage turns 0.8 % slower than by rolling; BPFI rises by as much as BPFO falls, and all spread by slip.
    const slow = 0.992;
    const places: [string, number, number][] = [
      ['outer', multiples.bpfo * slow, 0.8],
      ['inner', 9 - multiples.bpfo * slow, 0.5],
      ['roller', multiples.ftf * slow, 0.6],
      ['cage', multiples.ftf * slow, 0.8],
    ];
    for (const [id, multiple, least] of places) {
      expect(depth(id, multiple * shaftHz), id).toBeGreaterThan(least);
      expect(depth('healthy', multiple * shaftHz), `healthy, ${id}`).toBeLessThan(0.1);
    }
  });

  it('show noise as of cavitation all along, not as single knocks at one rate', () => {
    expect(rms(channel('cavitation', 'h')) / rms(channel('healthy', 'h'))).toBeGreaterThan(3);
    expect(depth('cavitation', 6 * shaftHz)).toBeGreaterThan(0.2);
    expect(depth('cavitation', multiples.bpfo * 0.992 * shaftHz)).toBeLessThan(0.1);
  });

  it('coast down to a standstill, through a resonance on the way', () => {
    const x = channel('coast-down', 'h');
    const { rateHz } = rendered.get('coast-down')!;
    const level = (from: number, to: number) => rms(x.subarray(from * rateHz, to * rateHz));
    // By force, which goes with speed squared: 13 Hz is passed at about 9 s; at 6 s it turns at 18.4 Hz.
    expect(level(8.5, 9.5) / 13 ** 2).toBeGreaterThan((2 * level(5.7, 6.3)) / 18.4 ** 2);
    expect(level(19.2, 20)).toBeLessThan(0.01);
  });
});
