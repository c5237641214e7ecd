import { describe, expect, it } from 'vitest';
import { CUT_S } from '../../src/measure/envelope.ts';
import { evidenceBands } from '../../src/measure/envelope-bands.ts';
import { envelopeOfBand, linesOf, spectrumOfEnvelope } from '../../src/measure/envelope-spectrum.ts';
import { recordTransform } from '../../src/signal/envelope.ts';
import { gaussian } from '../support/seeded.ts';
import { planOf, usual } from './bench.ts';

/** A carrier at 3 kHz whose power is modulated: (1 + Σ depth·cos). */
function withPower(
  rateHz: number,
  seconds: number,
  lines: readonly (readonly [number, number])[],
): Float64Array {
  return Float64Array.from({ length: Math.round(rateHz * seconds) }, (_, i) => {
    const t = i / rateHz;
    const power = lines.reduce((sum, [hz, depth]) => sum + depth * Math.cos(2 * Math.PI * hz * t), 1);
    return Math.sqrt(Math.max(0, power)) * Math.cos(2 * Math.PI * 3000 * t);
  });
}

describe('the spectrum of an envelope', () => {
  // Rates that divide in different ways, and the least Fmax, whose decimation filter is the longest.
  it.each([6400, 12_000, 25_600, 40_960, 48_828])(
    'has the averages that were asked for at %d Hz',
    (rateHz) => {
      const plan = planOf({
        rateHz,
        measure: { everyS: 1, velocity: { ...usual.velocity, lines: 100, averages: 1 } },
      });
      const envelope = plan.envelope!;
      const blocks = 2.5;
      expect(plan.recordSamples / rateHz).toBeLessThan(blocks * envelope.blockS + 0.2);
      const random = gaussian(1);
      const x = Float64Array.from({ length: plan.recordSamples }, () => random());
      const band = envelopeOfBand(
        recordTransform(x, { rateHz, cutS: CUT_S }),
        envelope.bandHz,
        envelope.fmaxHz,
      );
      const { spectrum } = spectrumOfEnvelope(band, envelope.blockS, envelope.fmaxHz);
      expect(spectrum.averages).toBeGreaterThanOrEqual(envelope.averages);
      // One sample of the block, rounded.
      expect(Math.abs(spectrum.lineHz / envelope.lineHz - 1)).toBeLessThan(
        0.5 / spectrum.blockSamples + 1e-9,
      );
    },
  );

  it('always averages two blocks, whatever length is asked for', () => {
    const x = withPower(12_800, 4, [[50, 0.5]]);
    const band = envelopeOfBand(recordTransform(x, { rateHz: 12_800, cutS: CUT_S }), [500, 5000], 500);
    expect(spectrumOfEnvelope(band, 100, 500).spectrum.averages).toBe(2);
  });

  it('gives lines with the depth of the modulation', () => {
    const x = withPower(12_800, 8, [
      [37.3, 0.5],
      [91.7, 0.2],
    ]);
    const band = envelopeOfBand(recordTransform(x, { rateHz: 12_800, cutS: CUT_S }), [500, 5000], 500);
    expect(band.mean).toBeCloseTo(1, 3);
    const { lines } = linesOf(spectrumOfEnvelope(band, 3.2, 500), band.mean, 10 ** (9 / 20));
    const strongest = [...lines].sort((a, b) => b.depth - a.depth).slice(0, 2);
    expect(strongest[0]!.hz).toBeCloseTo(37.3, 2);
    expect(strongest[0]!.depth).toBeCloseTo(0.5, 2);
    expect(strongest[1]!.hz).toBeCloseTo(91.7, 2);
    expect(strongest[1]!.depth).toBeCloseTo(0.2, 2);
  });

  it('lets one line stand where several maxima are closer than it is wide', () => {
    const x = withPower(12_800, 8, [
      [50, 0.5],
      [50.4, 0.3],
    ]);
    const band = envelopeOfBand(recordTransform(x, { rateHz: 12_800, cutS: CUT_S }), [500, 5000], 500);
    const set = linesOf(spectrumOfEnvelope(band, 3.2, 500), band.mean, 10 ** (9 / 20));
    const near = set.lines.filter(({ hz }) => Math.abs(hz - 50.2) < 1.5 * set.resolutionHz);
    expect(near).toHaveLength(1);
    for (let i = 1; i < set.lines.length; i++) {
      expect(set.lines[i]!.hz - set.lines[i - 1]!.hz).toBeGreaterThanOrEqual(1.5 * set.resolutionHz);
    }
  });
});

describe('evidenceBands', () => {
  it('has the whole band and the parts of which half remains', () => {
    expect(evidenceBands([500, 4687.5])).toEqual([
      [500, 4687.5],
      [500, 1500],
      [1500, 3000],
      [3000, 4687.5],
    ]);
    expect(evidenceBands([500, 16_000]).at(-1)).toEqual([6000, 12_000]);
    expect(evidenceBands([1100, 4000])).toEqual([
      [1100, 4000],
      [1500, 3000],
    ]);
  });
});
