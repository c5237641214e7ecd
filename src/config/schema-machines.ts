/** Machines, their bearings and points in a station file. */

import { z } from 'zod';
import { ascending, id, idPattern, int, mqttTopic, num, text } from './schema-fields.ts';
import { measureOverride } from './schema-measure.ts';

const severity = z
  .union([
    z.literal('none'),
    z.strictObject({
      table: z
        .enum(['iso-10816-7', 'iso-20816-3', 'iso-10816-3'])
        .optional()
        .meta({ description: 'Published table, iso-10816-7 (pumps), iso-20816-3 or iso-10816-3' }),
      category: z.enum(['I', 'II']).optional().meta({ description: 'Category of iso-10816-7, I or II' }),
      rated_kw: num(0.01, 1_000_000, 'Rated power, kW').optional(),
      group: z.literal([1, 2]).optional().meta({ description: 'Group of iso-20816-3, 1 or 2' }),
      support: z
        .enum(['rigid', 'flexible'])
        .optional()
        .meta({ description: 'Support of iso-20816-3, rigid or flexible' }),
      limits_mm_s: z
        .tuple([z.number().gt(0).max(1000), z.number().gt(0).max(1000), z.number().gt(0).max(1000)])
        .refine(([a, b, c]) => a < b && b < c, { error: 'the three must rise: A/B, B/C, C/D' })
        .optional()
        .meta({ description: 'Own zone limits instead of a table: [A/B, B/C, C/D], mm/s RMS, above 0' }),
    }),
  ])
  .meta({ description: 'Severity zones: a table, own limits_mm_s, or none' });

const shaft = z
  .strictObject({
    rpm: num(1, 100_000, 'Nominal speed, r/min').optional(),
    tolerance_pct: num(0.1, 50, 'The spectrum is searched this far about rpm, %').optional(),
    rpm_range: ascending(1, 100_000, 'The spectrum is searched in this range, r/min').optional(),
    tachometer: z
      .strictObject({
        link: id('Link of the tachometer'),
        channel: text(255, 'Its channel'),
        pulses_per_rev: int(1, 10_000, 'Pulses per revolution').default(1),
      })
      .optional()
      .meta({ description: 'A pulse channel of a node' }),
    mqtt: mqttTopic('Topic whose payload is the speed in r/min').optional(),
  })
  .meta({ description: 'Where shaft speed comes from: rpm, rpm_range, tachometer or mqtt' });

const running = z
  .strictObject({
    above_mm_s: num(
      0.001,
      1000,
      'The machine runs while velocity overall is above this, mm/s RMS',
    ).optional(),
    tachometer: z.literal(true).optional().meta({ description: 'true: it runs while the tachometer turns' }),
    mqtt: mqttTopic('Topic whose payload says whether it runs').optional(),
  })
  .default({ above_mm_s: 0.5 })
  .meta({ description: 'How it is known that the machine runs: above_mm_s, tachometer or mqtt' });

const bearing = z.strictObject({
  id: id('Name of the bearing'),
  elements: int(3, 500, 'Rolling elements in one row').optional(),
  element_mm: num(0.1, 2000, 'Diameter of a rolling element, mm').optional(),
  pitch_mm: num(0.5, 10_000, 'Pitch circle diameter, mm').optional(),
  contact_deg: z
    .number()
    .min(0)
    .lt(90)
    .optional()
    .meta({ description: 'Contact angle, degrees, 0 to below 90' }),
  multiples: z
    .strictObject({
      ftf: z.number().gt(0).lt(1).meta({ description: 'Cage rate per shaft revolution, between 0 and 1' }),
      bsf: num(0.1, 500, 'Spins of an element per shaft revolution'),
      bpfo: num(0.5, 500, 'Outer race passes per shaft revolution'),
      bpfi: num(0.5, 500, 'Inner race passes per shaft revolution'),
    })
    .optional()
    .meta({ description: 'Frequencies per shaft revolution, instead of geometry' }),
});

const point = z.strictObject({
  id: id('Name of the point'),
  link: id('Link that it is measured through'),
  channel: text(255, 'Channel of that link'),
  direction: z
    .enum(['horizontal', 'vertical', 'axial', 'inline', 'cross'])
    .default('horizontal')
    .meta({ description: 'horizontal, vertical, axial, inline or cross (to the discharge)' }),
  part: z
    .enum(['motor', 'pump', 'gear', 'fan'])
    .default('motor')
    .meta({ description: 'motor, pump, gear or fan' }),
  end: z.enum(['de', 'nde']).optional().meta({ description: 'Drive end (de) or non-drive end (nde)' }),
  at: z
    .enum(['bearing', 'foot', 'frame', 'pipe'])
    .default('bearing')
    .meta({ description: 'bearing, foot, frame or pipe' }),
  bearing: z
    .union([z.string().regex(idPattern), z.array(z.string().regex(idPattern)).max(8)])
    .optional()
    .meta({ description: 'Bearing of the machine that is heard here: one id or a list of up to 8' }),
  thrust: z.boolean().default(false).meta({ description: 'true where the axial load is carried' }),
  ratio: num(0.001, 1000, 'Shaft speed here over that of the machine').default(1),
  severity: severity.optional(),
  measure: measureOverride.optional(),
});

export const machineSchema = z.strictObject({
  id: id('Name of the machine'),
  name: text(200, 'For people; left out, the id').optional(),
  mounting: z
    .enum(['horizontal', 'vertical', 'submersible'])
    .default('horizontal')
    .meta({ description: 'horizontal, vertical or submersible' }),
  severity: severity.default('none'),
  shaft: shaft.optional(),
  running,
  start_delay_s: num(0, 86_400, 'After a start, before readings count, s').default(20),
  usual_run_s: num(1, 31_536_000, 'How long it usually runs at a time, s; `check` compares').optional(),
  motor: z
    .strictObject({
      poles: int(2, 96, 'Poles of the motor, even').optional(),
      supply: z
        .enum(['mains', 'inverter'])
        .default('mains')
        .meta({ description: 'What feeds it, mains or inverter' }),
    })
    .optional()
    .meta({ description: 'The motor; left out, nothing electrical is judged' }),
  vanes: int(1, 100, 'Vanes of the impeller').optional(),
  bearings: z.array(bearing).max(32).default([]).meta({ description: 'Bearings, at most 32' }),
  points: z.array(point).min(1).max(64).meta({ description: 'Measuring points, 1 to 64' }),
  measure: measureOverride.optional(),
});
