import { describe, expect, it } from 'vitest';
import { type ChannelSettings, Converter, type Vibration } from '../../src/simulate/sensor.ts';
import { rms } from './dft.ts';

const h: ChannelSettings = { name: 'h', unit: 'g', unitsPerCount: 2 ** -11 };

/** A sine on every channel, in g. */
function sine(amplitudeG: number, hz: number): (rateHz: number) => Vibration {
  return (rateHz) => {
    let at = 0;
    return {
      fill(out, n) {
        for (const channel of out) {
          for (let i = 0; i < n; i++)
            channel[i] = amplitudeG * Math.sin((2 * Math.PI * hz * (at + i)) / rateHz);
        }
        at += n;
      },
    };
  };
}

function converted(converter: Converter, n: number): Int32Array {
  const counts = new Int32Array(n * converter.channels.length);
  converter.fill(counts, n);
  return counts;
}

describe('a converter', () => {
  it('rounds with a noise of q²/12 (Bennett 1948)', () => {
    const converter = new Converter(
      { seed: 1, nominalRateHz: 10_000, bits: 16, channels: [h] },
      sine(3, 12.3457),
    );
    const n = 50_000;
    const counts = converted(converter, n);
    const wanted = new Float64Array(n);
    sine(3, 12.3457)(10_000).fill([wanted], n);
    const error = wanted.map((g, i) => counts[i]! * 2 ** -11 - g);
    expect(rms(error) ** 2 / (2 ** -22 / 12)).toBeCloseTo(1, 1);
  });

  it('reaches 98.09 dB between a full-scale sine and its rounding noise at 16 bit (1.76 + 6.02·n)', () => {
    const scale = { ...h, unitsPerCount: 1 / 32_766.4 };
    const converter = new Converter(
      { seed: 1, nominalRateHz: 10_000, bits: 16, channels: [scale] },
      sine(1, 7.919),
    );
    const n = 50_000;
    const counts = converted(converter, n);
    const wanted = new Float64Array(n);
    sine(1, 7.919)(10_000).fill([wanted], n);
    const error = wanted.map((g, i) => counts[i]! / 32_766.4 - g);
    expect(20 * Math.log10(rms(wanted) / rms(error))).toBeCloseTo(98.09, 0);
    expect(converter.overRange).toBe(0);
  });

  it('stops at full scale and counts the samples there', () => {
    for (const bits of [16, 24] as const) {
      const fullScaleG = 2 ** (bits - 1) * 2 ** -11;
      const converter = new Converter(
        { seed: 1, nominalRateHz: 1000, bits, channels: [h] },
        sine(2 * fullScaleG, 1),
      );
      const counts = converted(converter, 1000);
      expect(Math.max(...counts)).toBe(2 ** (bits - 1) - 1);
      expect(Math.min(...counts)).toBe(-(2 ** (bits - 1)));
      // A sine of twice the range is beyond it for two thirds of the time: |sin| > ½.
      expect(Math.abs(converter.overRange / 1000 - 2 / 3)).toBeLessThan(0.005);
    }
  });

  it('samples at the rate of a clock that is wrong, while it claims the nominal one', () => {
    const settings = {
      seed: 1,
      nominalRateHz: 10_000,
      clockErrorPpm: 20_000,
      bits: 24,
      channels: [h],
    } as const;
    const converter = new Converter(settings, sine(1, 102));
    expect(converter.nominalRateHz).toBe(10_000);
    expect(converter.rateHz).toBeCloseTo(10_200, 9);
    const counts = converted(converter, 10_200);
    let rising = 0;
    for (let i = 1; i < counts.length; i++) if (counts[i - 1]! < 0 && counts[i]! >= 0) rising++;
    // 102 Hz for the second that 10 200 samples last; the first rise is the start itself.
    expect(rising).toBe(101);
  });

  it('adds sensor noise of the density given, each channel its own', () => {
    const noisy = { ...h, unitsPerCount: 2 ** -18, noiseGPerRtHz: 1e-4 };
    const channels = [noisy, { ...noisy, name: 'v' }];
    const converter = new Converter({ seed: 1, nominalRateHz: 20_000, bits: 24, channels }, sine(0, 1));
    const counts = converted(converter, 40_000);
    const one = Float64Array.from({ length: 40_000 }, (_, i) => counts[2 * i]! * 2 ** -18);
    const other = Float64Array.from({ length: 40_000 }, (_, i) => counts[2 * i + 1]! * 2 ** -18);
    // 1e-4 g/√Hz over 10 kHz is 0.01 g.
    expect(rms(one) / 0.01).toBeCloseTo(1, 1);
    const product = one.reduce((sum, x, i) => sum + x * other[i]!, 0) / 40_000 / 0.01 ** 2;
    expect(Math.abs(product)).toBeLessThan(4 / Math.sqrt(40_000));
  });

  it('gives m/s² where the sensor speaks that (1 g = 9.80665 m/s²)', () => {
    const metric = { name: 'x', unit: 'm/s2', unitsPerCount: 1e-3 } as const;
    const converter = new Converter(
      { seed: 1, nominalRateHz: 1000, bits: 24, channels: [metric] },
      sine(1, 250),
    );
    expect(converted(converter, 2)[1]).toBe(9807);
  });

  it('gives the same counts in whatever portions they are taken', () => {
    const make = () =>
      new Converter(
        {
          seed: 5,
          nominalRateHz: 1000,
          bits: 16,
          channels: [
            { ...h, noiseGPerRtHz: 1e-3 },
            { ...h, name: 'v' },
          ],
        },
        sine(1, 50),
      );
    const whole = converted(make(), 2000);
    const converter = make();
    const parts = new Int32Array(4000);
    for (let done = 0, take = 1; done < 2000; done += take, take = Math.min(2 * take, 700, 2000 - done)) {
      converter.fill(parts.subarray(2 * done), take);
    }
    expect(parts).toEqual(whole);
  });
});
