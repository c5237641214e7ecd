/** Whole readings against published values: counts in, `measureRecord`, figures out. */
import type { Bearing } from '../../src/config/station.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import type { Reading } from '../../src/measure/reading.ts';
import { G_PER_COUNT, planOf, type RecordOptions, recordOf, type Tone } from '../measure/bench.ts';
import type { OutsideCheck } from './outside-checks.ts';
import { velocityResponse } from './velocity-response.ts';

/** Case Western Reserve University bearing data center, drive end: published multiples. */
const cwru6205: Bearing = {
  id: 'de',
  elements: null,
  geometry: null,
  multiples: { ftf: 0.39828, bsf: 2.35675, bpfo: 3.5848, bpfi: 5.4152 },
};
const GRAVITY = 9.80665;
const known = new Map<string, Reading>();

/** A point on a 40 960 Hz node with 16 bit of 2⁻¹² g, but for what is asked. Measured once, however many figures are checked. */
function reading(id: string, tones: readonly Tone[], more: Partial<RecordOptions> = {}): Reading {
  let found = known.get(id);
  if (found === undefined) {
    const plan = planOf({
      machine: { shaft: { kind: 'fixed', rpm: 1500, tolerancePct: 0 } },
      point: { bearings: [cwru6205] },
    });
    found = measureRecord(plan, recordOf({ rateHz: 40_960, samples: plan.recordSamples, tones, ...more }));
    known.set(id, found);
  }
  return found;
}

/** Peak acceleration in g of an RMS velocity. */
const gPeak = (mmS: number, hz: number) => ((mmS / 1000) * Math.SQRT2 * 2 * Math.PI * hz) / GRAVITY;

const tenHertz = () => reading('10-hz-1-g', [[10, 1]]);
const calibrator = () => reading('159-hz', [[159.154943, (10 * Math.SQRT2) / GRAVITY]]);
const atShaft = () => reading('25-hz', [[25, gPeak(4.5, 25)]]);
const inchPerSecond = () => reading('inch', [[80, (0.0254 * 2 * Math.PI * 80) / GRAVITY]]);

const KINEMATICS = 'kinematics, g = 9.80665 m/s²';
const CALIBRATOR = 'hand-held calibrators: 10 m/s², 10 mm/s, 10 µm at 159.154943 Hz';
type Row = readonly [
  id: string,
  source: string,
  status: OutsideCheck['status'],
  value: number,
  relative: number,
  unit: string,
  measure: () => number | null,
];

/** A tone is read to 0.05 %: the noise of one count, the reach of the band and the spread of a line make that up. */
const TONE = 5e-4;
const conversions: Row[] = [
  [
    '10-hz-1-g.velocity',
    KINEMATICS,
    'computed',
    110.363587523,
    TONE,
    'mm/s rms',
    () => tenHertz().velocity.overall,
  ],
  ['10-hz-1-g.swing', KINEMATICS, 'computed', 4968.106928, 2e-3, 'µm p-p', () => tenHertz().displacement.p2p],
  [
    '10-hz-1-g.displacement',
    KINEMATICS,
    'computed',
    4968.106928 / (2 * Math.SQRT2),
    TONE,
    'µm rms',
    () => tenHertz().displacement.rms,
  ],
  [
    '10-hz-1-g.acceleration',
    KINEMATICS,
    'computed',
    6.934348716,
    TONE,
    'm/s² rms',
    () => times(tenHertz().acceleration.rms, GRAVITY),
  ],
  ['10-hz-1-g.peak', KINEMATICS, 'computed', 1, 2e-3, 'g', () => tenHertz().acceleration.peak],
  ['159-hz.velocity', CALIBRATOR, 'practice', 10, TONE, 'mm/s rms', () => calibrator().velocity.overall],
  ['159-hz.displacement', CALIBRATOR, 'practice', 10, TONE, 'µm rms', () => calibrator().displacement.rms],
  [
    '159-hz.acceleration',
    CALIBRATOR,
    'practice',
    10,
    TONE,
    'm/s² rms',
    () => times(calibrator().acceleration.rms, GRAVITY),
  ],
  ['25-hz.velocity', KINEMATICS, 'computed', 4.5, TONE, 'mm/s rms', () => atShaft().velocity.overall],
  ['25-hz.displacement', KINEMATICS, 'computed', 28.64789, TONE, 'µm rms', () => atShaft().displacement.rms],
  [
    '25-hz.acceleration',
    KINEMATICS,
    'computed',
    0.706858347,
    TONE,
    'm/s² rms',
    () => times(atShaft().acceleration.rms, GRAVITY),
  ],
  ['25-hz.order-1', KINEMATICS, 'computed', 4.5, TONE, 'mm/s rms', () => atShaft().orders['1'].mm_s],
  [
    '25-hz.running-speed',
    KINEMATICS,
    'computed',
    4.5,
    TONE,
    'mm/s rms',
    () => Number(atShaft().velocity['running-speed']),
  ],
  [
    'inch-per-second',
    '1 in/s peak, 1 in = 25.4 mm',
    'computed',
    17.960512242,
    TONE,
    'mm/s rms',
    () => inchPerSecond().velocity.overall,
  ],
];

function times(value: number | null, factor: number): number | null {
  return value === null ? null : value * factor;
}

/** Three orders of known velocity at once, each with its own phase. */
const orders = () =>
  reading('orders', [
    [25, gPeak(4, 25), 0.3],
    [50, gPeak(1.5, 50), 1.9],
    [75, gPeak(0.5, 75), 4.1],
  ]);
const orderRows = (['1', '2', '3'] as const).map(
  (order, index): Row => [
    `orders.${order}`,
    KINEMATICS,
    'computed',
    [4, 1.5, 0.5][index]!,
    2e-3,
    'mm/s rms',
    () => orders().orders[order].mm_s,
  ],
);

const responses = velocityResponse('record.response', (hz) => {
  // As large as 16 bit of 2⁻¹² g hold, so that what is left outside of the band stands over their rounding.
  const mmS = Math.min(10, 4 / gPeak(1, hz));
  const { velocity } = reading(`response-${hz}`, [[hz, gPeak(mmS, hz)]], { noiseG: 0.3 * G_PER_COUNT });
  return (velocity.overall ?? Number.NaN) / mmS;
});

/** (1 + 0.5·cos)·carrier of 1 g, modulated at the BPFO of the bearing of `planOf` below. */
const modulated = () => {
  const bpfoHz = 3.5848 * 25;
  return reading('modulated', [
    [5000, 1],
    [5000 - bpfoHz, 0.25],
    [5000 + bpfoHz, 0.25],
  ]);
};
const AMPLITUDE_MODULATION =
  '(1 + m·cos)·carrier, m = 0.5: squared envelope 1 + m²/2 with a line of 2m (identity)';
const envelopeRows: Row[] = [
  [
    'envelope.mean',
    AMPLITUDE_MODULATION,
    'computed',
    1.125,
    1e-3,
    'g²',
    () => modulated().envelope?.mean ?? null,
  ],
  [
    'envelope.line',
    AMPLITUDE_MODULATION,
    'computed',
    1,
    1e-3,
    'g²',
    () => modulated().envelope?.bpfo?.line ?? null,
  ],
  [
    'envelope.modulation',
    AMPLITUDE_MODULATION,
    'computed',
    1 / 1.125,
    1e-3,
    '',
    () => modulated().envelope?.bpfo?.modulation ?? null,
  ],
];

const resolution: OutsideCheck = {
  id: 'record.quantisation.noise-of-one-step',
  source: 'Bennett 1948: noise power q²/12, so 1.76 + 6.02·n dB for n bits of full scale',
  status: 'seen',
  value: 98.09,
  // The noise is known from 400 000 samples to 0.02 dB.
  tolerance: 0.1,
  unit: 'dB',
  // A tone of full scale, 16 bit: what remains of it when the exact tone is taken away, both through the measurement.
  measure: () => {
    const amplitudeG = 32_767 * G_PER_COUNT;
    const hz = 1234.567;
    const options = { rateHz: 40_960, noiseG: 0, countRange: null } as const;
    const plan = planOf({ machine: { shaft: null } });
    const whole = recordOf({ ...options, samples: plan.recordSamples, tones: [[hz, amplitudeG]] });
    const fine = 2 ** 14;
    const error = whole.counts.map((count, i) =>
      Math.round(fine * (count - (amplitudeG / G_PER_COUNT) * Math.cos((2 * Math.PI * hz * i) / 40_960))),
    );
    const tone = measureRecord(plan, whole).acceleration.rms!;
    const noise = measureRecord(plan, { ...whole, counts: error, unitsPerCount: G_PER_COUNT / fine });
    return 20 * Math.log10(tone / noise.acceleration.rms!);
  },
};

export const recordChecks: readonly OutsideCheck[] = [
  ...[...conversions, ...orderRows, ...envelopeRows].map(
    ([id, source, status, value, relative, unit, measure]): OutsideCheck => ({
      id: `record.${id}`,
      source,
      status,
      value,
      tolerance: relative * value,
      unit,
      measure: () => measure() ?? Number.NaN,
    }),
  ),
  ...responses,
  resolution,
];
