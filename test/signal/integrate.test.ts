import { describe, expect, it } from 'vitest';
import {
  type AccelerationUnit,
  displacementWaveform,
  displacementWeights,
  velocityWeights,
} from '../../src/signal/integrate.ts';
import { SignalRangeError } from '../../src/signal/range-error.ts';
import { averagedSpectrum, bandMeanSquare, type Spectrum } from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';
import type { WindowName } from '../../src/signal/window.ts';
import { noise, sine, sum } from './support.ts';

const rateHz = 2560;
const spectrumOf = (x: Float64Array, blockSamples: number, window: WindowName = 'hann') =>
  averagedSpectrum(x, { rateHz, blockSamples, window });
const rootOf = (spectrum: Spectrum, weight: Float64Array, bandHz: [number, number]) =>
  Math.sqrt(bandMeanSquare(spectrum, bandHz, { weight }));

// Kinematics with g = 9.80665 m/s², computed: frequency, unit, acceleration peak, mm/s RMS, µm RMS.
// 10 m/s² = 10 mm/s = 10 µm at 159.154943 Hz: hand-held calibrators, common practice.
const conversions: [number, AccelerationUnit, number, number, number][] = [
  [10, 'g', 1, 110.363587523, 4968.106928 / 2 / Math.SQRT2],
  [159.154943, 'm/s2', 10 * Math.SQRT2, 10, 10],
  [25, 'm/s2', 0.706858347 * Math.SQRT2, 4.5, 28.64789],
];

describe.each(conversions)('%f Hz in %s, %f peak', (hz, unit, peak, velocity, displacement) => {
  it.each([
    // T = 3.2 s is 3200 lines to 1000 Hz; the line spread is allowed for to the second order.
    { lines: 3200, window: 'hann', relative: 1e-5 },
    { lines: 800, window: 'hann', relative: 5e-4 },
    { lines: 3200, window: 'flat-top', relative: 2e-4 },
  ] as const)('reads true at $lines lines, $window', ({ lines, window, relative }) => {
    const blockSamples = Math.round((lines / 1000) * rateHz);
    const spectrum = spectrumOf(
      sine(4 * blockSamples, { rateHz, hz, amplitude: peak, phase: 0.1 }),
      blockSamples,
      window,
    );
    expect(
      Math.abs(rootOf(spectrum, velocityWeights(spectrum, unit), [5, 1000]) / velocity - 1),
    ).toBeLessThan(relative);
    expect(
      Math.abs(rootOf(spectrum, displacementWeights(spectrum, unit), [5, 1000]) / displacement - 1),
    ).toBeLessThan(2 * relative);
  });
});

it('reads 110.36 mm/s for 10 Hz at 1 g peak on the very edge of 10–1000 Hz', () => {
  const spectrum = spectrumOf(sine(5 * 8192, { rateHz, hz: 10 }), 8192);
  expect(rootOf(spectrum, velocityWeights(spectrum, 'g'), [10, 1000]).toFixed(2)).toBe('110.36');
});

it('allows for the spread of a line: without it velocity would read high', () => {
  const spectrum = spectrumOf(sine(5 * 8192, { rateHz, hz: 10 }), 8192);
  const plain = new Float64Array(spectrum.meanSquare.length);
  for (let k = 1; k < plain.length; k++) plain[k] = (9806.65 / (2 * Math.PI * k * spectrum.binHz)) ** 2;
  // 1 + 3σ²/f² with σ² = 1/3 at 32 lines, so half of 1/1024 in RMS.
  expect(rootOf(spectrum, plain, [5, 1000]) / 110.363587523 - 1).toBeCloseTo(1 / 2048, 5);
});

it('gives 0 Hz no weight', () => {
  const spectrum = spectrumOf(noise(8192, 1), 8192);
  expect(velocityWeights(spectrum, 'g')[0]).toBe(0);
  expect(displacementWeights(spectrum, 'g')[0]).toBe(0);
});

describe('the displacement waveform', () => {
  it('swings 4968.1 µm peak to peak at 10 Hz, 1 g peak', () => {
    const swing = statistics(
      displacementWaveform(sine(25_600, { rateHz, hz: 10 }), { rateHz, bandHz: [10, 1000], unit: 'g' }),
    );
    // Settling of the band's lower flank: within 0.03 %.
    expect(Math.abs(swing.peakToPeak / 4968.106928 - 1)).toBeLessThan(3e-4);
  });

  it('follows a sum of tones sample by sample, offset left out', () => {
    const tones = [
      { hz: 12.3, amplitude: 2, phase: 0.4 },
      { hz: 24.7, amplitude: 5, phase: 1.9 },
      { hz: 148, amplitude: 30, phase: 4 },
    ];
    const x = sum(...tones.map((t) => sine(25_600, { rateHz, ...t }))).map((v) => v + 7);
    const out = displacementWaveform(x, { rateHz, bandHz: [10, 1000], unit: 'm/s2' });
    const cut = (x.length - out.length) / 2;
    expect(cut).toBe(3 * Math.ceil(1.9 * 256));
    const truth = sum(
      ...tones.map((t) =>
        sine(25_600, { rateHz, ...t, amplitude: (-1e6 * t.amplitude) / (2 * Math.PI * t.hz) ** 2 }),
      ),
    );
    const largest = statistics(truth).peak;
    out.forEach((v, i) => {
      expect(Math.abs(v - truth[i + cut]!) / largest).toBeLessThan(1e-3);
    });
  });

  it('agrees with the spectrum in RMS on noise', () => {
    const x = noise(25_600 * 2, 12);
    const bandHz: [number, number] = [50, 800];
    const spectrum = spectrumOf(x, 8192);
    const { rms } = statistics(displacementWaveform(x, { rateHz, bandHz, unit: 'g' }));
    // The flank from 25 to 50 Hz lets some through: white acceleration has displacement power of f^−4 there.
    const power = (lowHz: number, highHz: number, gain: (f: number) => number) => {
      let total = 0;
      for (let f = lowHz + 0.05; f < highHz; f += 0.1) total += (gain(f) ** 2 / f ** 4) * 0.1;
      return total;
    };
    const flank = power(25, 50, (f) => Math.sin((Math.PI / 2) * ((f - 25) / 25)) ** 2);
    const expected = Math.sqrt(1 + flank / power(50, 800, () => 1));
    // Random error over some 20 Hz and 20 s: 1/√400 of power, 2.5 % of RMS.
    const seen = rms / rootOf(spectrum, displacementWeights(spectrum, 'g'), bandHz);
    expect(Math.abs(seen / expected - 1)).toBeLessThan(0.05);
  });

  it('refuses a short stretch and a band out of order', () => {
    const options = { rateHz, bandHz: [10, 1000] as const, unit: 'g' as const };
    expect(() => displacementWaveform(new Float64Array(3895), options)).toThrow(/needs 3896 samples or more/);
    expect(displacementWaveform(new Float64Array(3896), options).length).toBe(974);
    for (const bandHz of [
      [0, 1000],
      [10, 10],
      [10, 2000],
    ] as const) {
      expect(() => displacementWaveform(new Float64Array(9000), { ...options, bandHz })).toThrow(
        SignalRangeError,
      );
    }
  });
});
