import { describe, expect, it } from 'vitest';
import { findShaftSpeed, type SpeedLines, type SpeedRange } from '../../src/machine/shaft-speed.ts';

const range: SpeedRange = { lowHz: 23.9, highHz: 25.4, synchronousHz: null, mainsHz: 50 };

function spectrum(lines: readonly (readonly [hz: number, overFloorDb: number])[]): SpeedLines {
  return { lines: lines.map(([hz, overFloorDb]) => ({ hz, overFloorDb })), lineHz: 0.3125, fmaxHz: 1000 };
}

describe('shaft speed from lines', () => {
  it('is the worked example: harmonics of 24.7 Hz', () => {
    const found = findShaftSpeed(
      [
        spectrum([
          [24.7, 30],
          [49.4, 30],
          [74.1, 30],
        ]),
      ],
      range,
    );
    expect(found.hz).toBeCloseTo(24.7, 6);
    expect(found.reason).toBeNull();
  });

  it('is finer than a line, by the high harmonics', () => {
    // Each line is off by up to a tenth of a line spacing; the twelfth harmonic divides its error by twelve.
    const off = [0.03, -0.02, 0.03, -0.03, 0.02, 0.03, -0.03, 0.01, -0.02, 0.03, -0.03, 0.02];
    const lines = off.map((error, i): [number, number] => [24.683 * (i + 1) + error, 25]);
    const found = findShaftSpeed([spectrum(lines)], range);
    expect(Math.abs(found.hz! / 24.683 - 1)).toBeLessThan(0.0002);
  });

  it('is sure where much is met and nothing else comes near, and less so with a single line', () => {
    const rich = findShaftSpeed(
      [
        spectrum([
          [24.7, 30],
          [49.4, 30],
          [74.1, 30],
        ]),
      ],
      range,
    );
    const single = findShaftSpeed([spectrum([[24.7, 20]])], range);
    expect(rich).toMatchObject({ confidence: 1 });
    expect(single.hz).not.toBeNull();
    expect((single as { confidence: number }).confidence).toBeLessThan(0.5);
  });

  it('adds up the evidence of several spectra', () => {
    const acceleration = spectrum([
      [24.2, 20],
      [24.9, 20],
    ]);
    const envelope = spectrum([
      [24.9, 25],
      [49.8, 25],
      [74.7, 25],
    ]);
    expect(findShaftSpeed([acceleration], range).hz).toBeNull();
    expect(findShaftSpeed([acceleration, envelope], range).hz).toBeCloseTo(24.9, 6);
  });

  it('is unknown where two speeds compete, and names them', () => {
    const found = findShaftSpeed(
      [
        spectrum([
          [24.2, 30],
          [25.0, 29],
        ]),
      ],
      range,
    );
    expect(found.hz).toBeNull();
    expect(found.reason).toBe('speed unknown: 24.20 Hz and 25.00 Hz compete');
  });

  it('is unknown where nothing stands out', () => {
    expect(findShaftSpeed([spectrum([])], range).reason).toMatch(/^speed unknown: no line stands out/);
    expect(findShaftSpeed([spectrum([[24.7, 9]])], range).reason).toMatch(/no line stands out/);
    expect(findShaftSpeed([spectrum([[31.2, 40]])], range).reason).toMatch(/no line stands out/);
  });

  it('is never at or above synchronous speed on mains', () => {
    const mains = { ...range, synchronousHz: 25 };
    expect(findShaftSpeed([spectrum([[25, 30]])], mains).reason).toMatch(/not below synchronous/);
    expect(findShaftSpeed([spectrum([[25.2, 30]])], mains).reason).toMatch(/not below synchronous/);
    expect(findShaftSpeed([spectrum([[24.98, 30]])], mains).hz).toBeCloseTo(24.98, 6);
    // An inverter has no such relation.
    expect(findShaftSpeed([spectrum([[25.2, 30]])], range).hz).toBeCloseTo(25.2, 6);
  });

  it('does not take mains pickup for speed, at its frequency or at half of it', () => {
    const twoPoles = { lowHz: 48, highHz: 51, synchronousHz: null, mainsHz: 50 };
    expect(
      findShaftSpeed(
        [
          spectrum([
            [50, 50],
            [100, 50],
          ]),
        ],
        twoPoles,
      ).hz,
    ).toBeNull();
    expect(
      findShaftSpeed(
        [
          spectrum([
            [50, 50],
            [100, 50],
          ]),
        ],
        range,
      ).hz,
    ).toBeNull();
    expect(
      findShaftSpeed(
        [
          spectrum([
            [50, 50],
            [100, 50],
            [48.9, 25],
          ]),
        ],
        twoPoles,
      ).hz,
    ).toBeCloseTo(48.9, 6);
  });

  it('tells a speed from its half and its double over a wide range', () => {
    const wide = { ...range, lowHz: 10, highHz: 50 };
    const harmonics = Array.from({ length: 24 }, (_, i): [number, number] => [24.7 * (i + 1), 25]);
    expect(findShaftSpeed([spectrum(harmonics)], wide).hz).toBeCloseTo(24.7, 6);
    expect(findShaftSpeed([spectrum([[24.7, 30]])], wide).hz).toBeCloseTo(24.7, 6);
  });

  it('is unknown where a line just outside of the range far outshines what is met inside', () => {
    const inside = [
      [24.5, 25],
      [49, 25],
      [73.5, 20],
    ] as const;
    expect(findShaftSpeed([spectrum([...inside])], range).hz).toBeCloseTo(24.5, 6);
    expect(findShaftSpeed([spectrum([...inside, [26.2, 60]])], range).reason).toMatch(
      /the line at 26.20 Hz outshines 24.50 Hz but lies outside of what the settings allow/,
    );
    // As strong as that inside, it is another machine; far away, another order.
    expect(findShaftSpeed([spectrum([...inside, [26.2, 30]])], range).hz).toBeCloseTo(24.5, 6);
    expect(findShaftSpeed([spectrum([...inside, [29, 60]])], range).hz).toBeCloseTo(24.5, 6);
  });

  it('says so where the best line lies just outside of the range', () => {
    expect(findShaftSpeed([spectrum([[25.5, 30]])], range).reason).toMatch(/just outside/);
  });

  it('refuses a range that is none', () => {
    expect(() => findShaftSpeed([], { ...range, lowHz: 0 })).toThrow(RangeError);
    expect(() => findShaftSpeed([], { ...range, lowHz: 30 })).toThrow(RangeError);
  });
});

describe('a dominant first harmonic', () => {
  it('is not put in doubt by a lone line that another speed would have as a higher harmonic', () => {
    // 1x of an unbalanced shaft, 65 dB over the floor; an outer race at 3.585x, whose second line is 7 × 25.6 Hz.
    const lines = [
      { hz: 25, overFloorDb: 65 },
      { hz: 89.63, overFloorDb: 35 },
      { hz: 179.26, overFloorDb: 34 },
    ];
    const range = { lowHz: 24.25, highHz: 25.75, synchronousHz: null, mainsHz: 50 };
    const found = findShaftSpeed([{ lines, lineHz: 0.3, fmaxHz: 1000 }], range);
    expect(found.hz).toBeCloseTo(25, 6);
    expect(found.hz === null ? 0 : found.confidence).toBeGreaterThan(0.7);
  });
});
