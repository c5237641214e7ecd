/** The figures of a report are those of `replay`, and its curves are what the figures were made of. */
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { floatsOf } from '../../src/report/client/decode.js';
import { demoData, demoStation, figuresOf, type Line, removeFolder, replayLines, report } from './rig.ts';

afterAll(removeFolder);

interface Curve {
  stepHz: number;
  values: string;
}
interface PagePoint {
  key: string;
  recordS: [number, number];
  velocity: Curve & { marks: { hz: number; name: string }[] };
  envelope: Curve;
}

const dataOf = (text: string) =>
  JSON.parse(/id="report-data">(.*?)<\/script>/s.exec(text)![1]!) as { points: PagePoint[] };

/** Every number of a reading line by its path. */
function leaves(value: unknown, prefix = ''): [string, number][] {
  if (typeof value === 'number') return [[prefix, value]];
  if (typeof value !== 'object' || value === null || Array.isArray(value)) return [];
  return Object.entries(value).flatMap(([key, part]) =>
    leaves(part, prefix === '' ? key : `${prefix}.${key}`),
  );
}

async function pageAndReadings(id: string) {
  const file = join(demoData, `${id}.flac`);
  const { text } = await report({ file, config: demoStation });
  const lines = (await replayLines(file)).filter(({ kind }) => kind === 'reading');
  const { points } = dataOf(text);
  const shown = points.map(({ key, recordS }) => {
    const firstIndex = Math.round(recordS[0] * 25_600);
    return lines.find((line) => key === `pump-3/${line.point}` && line.first_index === firstIndex)!;
  });
  return { text, points, shown, lines };
}

describe('the figures of a report', () => {
  it.each(['outer', 'unbalance'])('of %s are, each and all, those that replay --json gives', async (id) => {
    const { text, shown, lines } = await pageAndReadings(id);
    const figures = figuresOf(text);
    expect(shown).toHaveLength(3);
    for (const line of shown) {
      const { first_index, ...rest } = line as Line & { first_index: number };
      const numbers = leaves(rest);
      expect(numbers.length).toBeGreaterThan(25);
      for (const [path, value] of numbers) {
        expect(Number(figures.get(`pump-3/${line.point}/${path}`)), path).toBe(value);
      }
      expect(text).toContain(`from sample ${first_index}`);
    }
    // Every reading is in the list of all, with its overall velocity.
    for (const line of lines) {
      expect(text).toContain(line.t.replace('T', ' ').replace('Z', ' UTC'));
      expect(text).toContain(`>${(line.velocity as { overall: number }).overall}<`);
    }
  });

  it('have curves that add up to them: the velocity lines to the overall velocity', async () => {
    const { points, shown } = await pageAndReadings('misalignment');
    points.forEach(({ velocity }, k) => {
      const values = floatsOf(velocity.values);
      // Hann: a line's power lies in 1.5/T of the spectrum (Harris 1978); 1/T is 0.625 Hz at 1600 lines of 1000 Hz.
      let sum = 0;
      values.forEach((value, bin) => {
        const hz = bin * velocity.stepHz;
        if (hz >= 10 && hz <= 1000) sum += (value ** 2 * velocity.stepHz) / (1.5 * 0.625);
      });
      const { overall } = shown[k]!.velocity as { overall: number };
      expect(Math.sqrt(sum) / overall, shown[k]!.point).toBeCloseTo(1, 2);
    });
  });

  it('have an envelope curve that stands as high at the found line as the reading says', async () => {
    const { points, shown } = await pageAndReadings('outer');
    points.forEach(({ envelope }, k) => {
      const { hz, line } = (shown[k]!.envelope as { bpfo: { hz: number; line: number } }).bpfo;
      const values = floatsOf(envelope.values);
      const bin = Math.round(hz / envelope.stepHz);
      const highest = Math.max(...values.slice(bin - 1, bin + 2));
      // Between two bins a Hann line loses at most 1.42 dB, 15 % (Harris 1978).
      expect(highest / line).toBeGreaterThan(0.84);
      expect(highest / line).toBeLessThan(1.001);
    });
  });

  it('name the shaft, its harmonics and the vane pass where speed and vanes put them', async () => {
    const { points, shown } = await pageAndReadings('healthy');
    const { marks } = points[0]!.velocity;
    const { hz } = shown[0]!.shaft as { hz: number };
    const at = (name: string) => marks.find((mark) => mark.name === name)?.hz;
    expect(at('1x')! / hz).toBeCloseTo(1, 3);
    expect(at('3x')! / hz).toBeCloseTo(3, 2);
    expect(at('vane pass')! / hz).toBeCloseTo(6, 2);
    expect(at('2x mains')).toBe(100);
  });
});

describe('the record that a report shows', () => {
  it('is the last whose speed is known where the machine coasts down', async () => {
    const file = join(demoData, 'coast-down.flac');
    const { text } = await report({ file, config: demoStation });
    const lines = (await replayLines(file)).filter(({ kind }) => kind === 'reading');
    for (const { key, recordS } of dataOf(text).points) {
      const own = lines.filter(({ point }) => key === `pump-3/${point}`);
      const known = own.filter((line) => (line.shaft as { hz: number | null }).hz !== null);
      expect(known.length).toBeGreaterThan(0);
      expect(known.length).toBeLessThan(own.length);
      expect(Math.round(recordS[0] * 6400), key).toBe(known.at(-1)!.first_index);
    }
  });
});
