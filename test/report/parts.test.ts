/** The parts of a report that compute, and those of its browser side that do. */
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { bearingMultiples } from '../../src/machine/bearing.ts';
import type { EnvelopeReading } from '../../src/measure/reading.ts';
import { cascadeOf } from '../../src/report/cascade.ts';
import { floatsOf, integersOf } from '../../src/report/client/decode.js';
import { betweenBins, decibel, placed, significant, stepped } from '../../src/report/client/figures.js';
import { Pyramid } from '../../src/report/client/pyramid.js';
import { clientScript } from '../../src/report/client-script.ts';
import { envelopeMarks, machineMarks } from '../../src/report/marks.ts';
import { html, scriptJson } from '../../src/report/markup.ts';
import { packFloats, packSamples } from '../../src/report/samples.ts';
import { averagedSpectrum, lineAmplitudes } from '../../src/signal/spectrum.ts';

describe('samples in a page', () => {
  it.each([
    [2, [0, 1, -1, 32_767, -32_768]],
    [3, [0, -1, 32_768, 8_388_607, -8_388_608]],
    [4, [0, -1, 8_388_608, 2_147_483_647, -2_147_483_648]],
  ])('are whole again after %i bytes each', (bytes, counts) => {
    const packed = packSamples(Int32Array.from(counts), 1000);
    expect(packed.bytesPerValue).toBe(bytes);
    expect(packed.block).toBe(1);
    expect(Array.from(integersOf(packed.base64, packed.bytesPerValue))).toEqual(counts);
  });

  it('become the extremes of blocks where they would exceed their budget, and none is lost', () => {
    const counts = Int32Array.from({ length: 10_001 }, (_, i) => (i === 7777 ? 900 : i % 100));
    const packed = packSamples(counts, 5000);
    expect(packed.base64.length).toBeLessThanOrEqual((5000 * 4) / 3 + 4);
    expect(packed.block).toBe(16);
    const pairs = integersOf(packed.base64, packed.bytesPerValue);
    expect(Math.max(...pairs)).toBe(900);
    expect(pairs[2 * Math.floor(7777 / 16) + 1]).toBe(900);
  });

  it('keep floats to the last bit', () => {
    const values = Float32Array.of(0, 1e-7, Math.PI, -2.5);
    expect(floatsOf(packFloats(values))).toEqual(values);
  });
});

describe('the pyramid of a waveform', () => {
  it('gives the extremes of any stretch, as looking at every sample does', () => {
    const counts = fc.array(fc.integer({ min: -32_768, max: 32_767 }), { minLength: 1, maxLength: 3000 });
    fc.assert(
      fc.property(counts, fc.nat(), fc.nat(), (list, a, b) => {
        const values = Int32Array.from(list);
        const from = a % values.length;
        const to = from + 1 + (b % (values.length - from));
        const stretch = values.slice(from, to);
        const found = new Pyramid(values, 1, values.length).extremes(from, to);
        expect(found).toEqual({ low: Math.min(...stretch), high: Math.max(...stretch) });
      }),
      { seed: 17, numRuns: 300 },
    );
  });

  it('misses neither end of a stretch: on a ramp both extremes are there', () => {
    const length = 5000;
    const ramp = new Pyramid(
      Int32Array.from({ length }, (_, i) => i),
      1,
      length,
    );
    fc.assert(
      fc.property(fc.nat({ max: length - 1 }), fc.nat({ max: length - 1 }), (a, b) => {
        const [from, last] = [Math.min(a, b), Math.max(a, b)];
        expect(ramp.extremes(from, last + 1)).toEqual({ low: from, high: last });
      }),
      { seed: 17, numRuns: 500 },
    );
  });

  it('of blocks takes every block that a stretch touches', () => {
    const pairs = Int32Array.of(-1, 1, -2, 5, -9, 3);
    const pyramid = new Pyramid(pairs, 4, 12);
    expect(pyramid.extremes(3, 5)).toEqual({ low: -2, high: 5 });
    expect(pyramid.extremes(8, 9)).toEqual({ low: -9, high: 3 });
    expect(pyramid.at(5)).toBe(1.5);
  });
});

describe('figures for people', () => {
  it('have four digits, places as many as they can tell apart, and decibels of 20 or 10', () => {
    expect(significant(0.00123456)).toBe('0.001235');
    expect(significant(1234.56)).toBe('1235');
    expect(significant(0)).toBe('0');
    expect(placed(24.6712, 0.3125)).toBe('24.67');
    expect(placed(1.23456789, 1 / 40_960)).toBe('1.234568');
    // Identities: a factor of ten is 20 dB in amplitude, 10 dB in power.
    expect(decibel(10, 20)).toBe(20);
    expect(decibel(10, 10)).toBe(10);
    expect(decibel(0, 20)).toBe(-300);
    expect([stepped(2.9965, 0.0005), stepped(1000, 200), stepped(2.5, 2.5)]).toEqual([
      '2.9965',
      '1000',
      '2.5',
    ]);
  });

  it('name a line between the bins, as a lone sine gives it', () => {
    // A sine of amplitude 3 at 50.3 Hz, lines 1 Hz apart, and the same padded to bins of 0.8 Hz.
    for (const rateHz of [1024, 1000]) {
      const x = Float64Array.from(
        { length: 4000 },
        (_, i) => 3 * Math.sin((2 * Math.PI * 50.3 * i) / rateHz),
      );
      const spectrum = averagedSpectrum(x, { rateHz, blockSamples: rateHz, window: 'hann' });
      const lines = lineAmplitudes(spectrum);
      const bin = lines.indexOf(Math.max(...lines));
      const step = spectrum.binHz / spectrum.lineHz;
      const { offset, height } = betweenBins(lines[bin - 1]!, lines[bin]!, lines[bin + 1]!, step);
      expect((bin + offset) * spectrum.binHz).toBeCloseTo(50.3, 2);
      expect(height).toBeCloseTo(3, 2);
    }
    expect(betweenBins(2, 1, 0, 1)).toEqual({ offset: 0, height: 1 });
  });
});

describe('marks', () => {
  // Multiples of the drive end bearing 6205, as the Case Western bearing data center publishes them.
  const geometry = { elementMm: 0.3126 * 25.4, pitchMm: 1.537 * 25.4, contactDeg: 0 };
  const bearing = {
    id: 'de',
    multiples: bearingMultiples({ elements: 9, geometry, multiples: null }),
    nominalHz: null,
  };
  const none: EnvelopeReading = {
    unit: 'g²',
    band_hz: [500, 10_000],
    mean: 1,
    floor: 0.001,
    defect: null,
    bpfo: null,
    bpfi: null,
    bsf: null,
    ftf: null,
  };
  const at = (marks: ReturnType<typeof envelopeMarks>, name: string) =>
    marks.find((mark) => mark.name === name && mark.family !== 'shaft');

  it('put bearing frequencies, harmonics and sidebands where geometry and speed do', () => {
    const marks = envelopeMarks([bearing], none, 30, 700);
    expect(at(marks, 'BPFO')!.hz).toBeCloseTo(3.5848 * 30, 2);
    expect(at(marks, '3 BPFO')!.hz).toBeCloseTo(3 * 3.5848 * 30, 1);
    expect(at(marks, 'BPFI')!.hz).toBeCloseTo(5.4152 * 30, 2);
    expect(at(marks, 'BPFI − 1x')!.hz).toBeCloseTo(4.4152 * 30, 2);
    expect(at(marks, 'BPFI + 2x')!.hz).toBeCloseTo(7.4152 * 30, 2);
    expect(at(marks, '2xBSF')!.hz).toBeCloseTo(2 * 2.3567 * 30, 1);
    expect(at(marks, '2xBSF + 1 FTF')!.hz).toBeCloseTo((2 * 2.3567 + 0.3983) * 30, 1);
    expect(at(marks, 'FTF')!.hz).toBeCloseTo(0.3983 * 30, 2);
    expect(marks.every(({ hz }) => hz > 0 && hz <= 700)).toBe(true);
    expect(at(marks, 'BPFO')!.found).toBe(false);
  });

  it('move to the line that was found, with its harmonics and sidebands', () => {
    const bpfi = { expected_hz: 162.5, hz: 161, line: 1, over_floor_db: 20, modulation: 0.5, harmonics: 3 };
    const marks = envelopeMarks([bearing], { ...none, bearing: 'de', bpfi }, 30, 700);
    expect(at(marks, 'BPFI')!).toMatchObject({ hz: 161, found: true });
    expect(at(marks, '2 BPFI + 1x')!.hz).toBe(2 * 161 + 30);
    const other = envelopeMarks([bearing], { ...none, bearing: 'nde', bpfi }, 30, 700);
    expect(at(other, 'BPFI')!.found).toBe(false);
  });

  it('are none that need a speed where there is none, and no mains behind an inverter', () => {
    expect(envelopeMarks([bearing], none, null, 700)).toEqual([]);
    const marks = machineMarks({ shaftHz: null, vanes: 5, mainsHz: 60, supply: 'mains' }, 1000);
    expect(marks.map(({ name, hz }) => [name, hz])).toEqual([['2x mains', 120]]);
    expect(machineMarks({ shaftHz: null, vanes: 5, mainsHz: 60, supply: 'inverter' }, 1000)).toEqual([]);
  });
});

describe('the cascade', () => {
  it('follows a tone that falls, slice by slice', () => {
    const rateHz = 2560;
    const seconds = 20;
    // From 60 Hz to 20 Hz: 60 − 2·t.
    const samples = Float64Array.from({ length: seconds * rateHz }, (_, i) => {
      const t = i / rateHz;
      return Math.sin(2 * Math.PI * (60 * t - t * t));
    });
    const spectrum = averagedSpectrum(samples, { rateHz, blockSamples: rateHz, window: 'hann' });
    const whole = {
      samples,
      rateHz,
      fmaxHz: 1000,
      firstAt: 0,
      factor: 1,
      spectrum,
      plannedLineHz: spectrum.lineHz,
      shortLineHz: spectrum.lineHz,
      short: null,
    };
    const cascade = cascadeOf(whole, 50)!;
    expect(cascade.timesS.length).toBeGreaterThan(20);
    cascade.timesS.forEach((timeS, k) => {
      const slice = Array.from(cascade.values.slice(k * cascade.bins, (k + 1) * cascade.bins));
      const hz = cascade.firstHz + slice.indexOf(Math.max(...slice)) * cascade.stepHz;
      expect(Math.abs(hz - (60 - 2 * timeS)), `${timeS} s`).toBeLessThan(2);
    });
    expect(cascade.firstHz + cascade.bins * cascade.stepHz).toBeLessThanOrEqual(8 * 50 + 2);
  });

  it('is none of a recording too short for a row', () => {
    const samples = new Float64Array(200);
    const spectrum = averagedSpectrum(samples, { rateHz: 2560, blockSamples: 128, window: 'hann' });
    const whole = {
      samples,
      rateHz: 2560,
      fmaxHz: 1000,
      firstAt: 0,
      factor: 1,
      spectrum,
      plannedLineHz: spectrum.lineHz,
      shortLineHz: spectrum.lineHz,
      short: null,
    };
    expect(cascadeOf(whole, 25)).toBeNull();
  });
});

describe('markup', () => {
  it('escapes every value and nothing twice', () => {
    const inner = html`<b>${'<i>&"\''}</b>`;
    expect(html`<p title="${'"'}">${[inner, null, false, 7]}</p>`.text).toBe(
      '<p title="&quot;"><b>&lt;i&gt;&amp;&quot;&#39;</b>7</p>',
    );
  });

  it('gives JSON that no script element ends at', () => {
    const text = scriptJson({ a: '</script><!--' });
    expect(text).not.toContain('<');
    expect(JSON.parse(text)).toEqual({ a: '</script><!--' });
  });

  it('joins the browser side into one script that parses and ends no script element', () => {
    const script = clientScript();
    expect(() => new Function(script)).not.toThrow();
    expect(script).not.toMatch(/<\/script/i);
  });
});
