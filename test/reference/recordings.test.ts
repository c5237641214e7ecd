/** The signal room on the open recordings in ../shared/data, where that folder is there, against an independent analysis. */
import { existsSync, readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';
import { velocityWeights } from '../../src/signal/integrate.ts';
import { averagedSpectrum } from '../../src/signal/spectrum.ts';
import { statistics } from '../../src/signal/statistics.ts';

const folder = fileURLToPath(new URL('../../../shared/data/', import.meta.url));

interface Analysis {
  time: {
    acc_rms_g: number;
    acc_peak_g: number;
    acc_peak_to_peak_g: number;
    crest_factor: number;
    kurtosis: number;
    skewness: number;
    vel_rms_mm_s: number;
  };
}

// Kurtosis of the drive-end channel as read by others (Smith and Randall 2015 and two readers): a check of loading.
const published: Record<string, number> = { 131: 7.6, 170: 22.1, 186: 8.84, 198: 2.94, 235: 22.0 };

function load(name: string): { samples: Float64Array; rateHz: number } {
  const about = JSON.parse(readFileSync(`${folder}${name}.json`, 'utf8')) as Record<string, number>;
  const bytes = readFileSync(`${folder}${name}.i16`);
  const samples = new Float64Array(bytes.length / 2);
  for (let i = 0; i < samples.length; i++) samples[i] = bytes.readInt16LE(2 * i) * about.lsb_g!;
  return { samples, rateHz: about.sample_rate_hz! };
}

if (!existsSync(`${folder}reference.json`)) {
  it('says that there are no recordings', () => {
    console.log('../shared/data is not there: nothing was compared on open recordings');
    expect(Object.keys(published)).toHaveLength(5);
  });
} else {
  const analyses = JSON.parse(readFileSync(`${folder}reference.json`, 'utf8')) as Record<string, Analysis>;

  describe.each(Object.entries(analyses))('%s', (name, { time }) => {
    const { samples, rateHz } = load(name);

    it('agrees in its moments to 1e-4', () => {
      const s = statistics(samples);
      expect(Math.abs(s.rms / time.acc_rms_g - 1)).toBeLessThan(1e-4);
      expect(Math.abs(s.peak / time.acc_peak_g - 1)).toBeLessThan(1e-4);
      expect(Math.abs(s.peakToPeak / time.acc_peak_to_peak_g - 1)).toBeLessThan(1e-4);
      expect(Math.abs(s.crest! / time.crest_factor - 1)).toBeLessThan(1e-4);
      expect(Math.abs(s.kurtosis! / time.kurtosis - 1)).toBeLessThan(1e-4);
      expect(Math.abs(s.skewness! - time.skewness)).toBeLessThan(1e-4);
      const known = published[name.match(/\/(\d+)_/)?.[1] ?? ''];
      // The recording here is a part of the published one.
      if (known !== undefined) expect(Math.abs(s.kurtosis! / known - 1)).toBeLessThan(0.1);
    });

    it('agrees in velocity to 1 %, from the same segments and between the same lines', () => {
      // At the raw rate: decimation's margins would cost the shortest records one of their five segments.
      const { meanSquare, ...spectrum } = averagedSpectrum(samples, {
        rateHz,
        blockSamples: rateHz,
        window: 'hann',
      });
      const weights = velocityWeights({ meanSquare, ...spectrum }, 'g');
      // The reference takes the lines 10 to 1000 and no reach beyond, which reads up to 9 % more on records that drift.
      const first = Math.ceil(9.5 / spectrum.binHz);
      const last = Math.floor(1000.5 / spectrum.binHz);
      let sum = 0;
      for (let k = first; k <= last; k++) sum += meanSquare[k]! * weights[k]!;
      // Padding to a power of two cuts a drift that falls through 10 Hz at another place than a line of 1 Hz does.
      expect(Math.abs(Math.sqrt(sum) / time.vel_rms_mm_s - 1)).toBeLessThan(
        /\/3008_/.test(name) ? 0.03 : 0.01,
      );
    });
  });
}
