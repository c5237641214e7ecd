/** The measuring settings of a station file. */

import { z } from 'zod';
import { ascending, id, int, num } from './schema-fields.ts';

const bandFields = {
  id: id('Name of the band, its key in the reading'),
  hz: ascending(0.1, 50_000, 'Edges in Hz').optional(),
  orders: ascending(0.05, 1000, 'Edges in multiples of shaft speed').optional(),
};
const everyS = num(0.5, 3600, 'A record starts every so often, s');
const velocityFields = {
  fmax_hz: num(11, 20_000, 'Upper edge of the velocity spectrum, Hz'),
  lines: int(25, 51_200, 'Lines of the velocity spectrum; the line spacing is fmax_hz / lines'),
  averages: int(1, 1000, 'Half-overlapped blocks to average, at least'),
  window: z
    .enum(['rectangular', 'hann', 'flat-top'])
    .meta({ description: 'Window, rectangular, hann or flat-top' }),
};
const envelopeFields = {
  band_hz: z
    .union([z.literal('auto'), ascending(1, 500_000, 'Edges in Hz')])
    .meta({ description: 'Band that is demodulated, [lower, upper] in Hz, or auto (by spectral kurtosis)' }),
  fmax_hz: z.union([z.literal('auto'), z.number().min(1).max(20_000)]).meta({
    description:
      'Upper edge of the envelope spectrum, 1 to 20000 Hz, or auto (the larger of 500 and 3.5 × BPFI)',
  }),
  lines: int(25, 51_200, 'Lines of the envelope spectrum'),
  averages: int(1, 1000, 'Half-overlapped blocks to average, at least'),
};
const bands = z
  .array(z.strictObject(bandFields))
  .max(16)
  .meta({ description: 'Banded velocity RMS beside `overall`, each with hz or orders; at most 16' });

/** Measuring settings of the station, with the defaults. */
export const stationMeasure = z
  .strictObject({
    every_s: everyS.default(10),
    velocity: z
      .strictObject({
        fmax_hz: velocityFields.fmax_hz.default(1000),
        lines: velocityFields.lines.default(3200),
        averages: velocityFields.averages.default(4),
        window: velocityFields.window.default('hann'),
      })
      .prefault({}),
    bands: bands.default([
      { id: 'low', hz: [2, 10] },
      { id: 'running-speed', orders: [0.8, 1.2] },
      { id: 'harmonics', orders: [1.8, 10.2] },
    ]),
    envelope: z
      .strictObject({
        band_hz: envelopeFields.band_hz.default([500, 16_000]),
        fmax_hz: envelopeFields.fmax_hz.default('auto'),
        lines: envelopeFields.lines.default(1600),
        averages: envelopeFields.averages.default(4),
      })
      .prefault({}),
  })
  .meta({ description: 'How to measure; defaults for every point' });

export const measureOverride = z
  .strictObject({
    every_s: everyS.optional(),
    velocity: z.strictObject(velocityFields).partial().optional(),
    bands: bands.optional(),
    envelope: z.strictObject(envelopeFields).partial().optional(),
  })
  .meta({ description: 'Overrides key by key; bands are replaced as a whole' });
