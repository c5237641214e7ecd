/**
 * The station file, as it is written: keys, types, ranges and defaults, each key with its meaning. The JSON Schema
 * for editors is generated from this. What concerns more than one key (references, exclusive keys, physical
 * sense) is checked in check-*.ts, so that a file's mistakes are all found in one go.
 */

import { z } from 'zod';

export const idPattern = /^[a-z0-9-]{1,32}$/;

/** The verbs of `ask/<verb>`. */
export const askVerbs = [
  'readings',
  'acknowledge',
  'shelve',
  'unshelve',
  'out-of-service',
  'in-service',
  'reset',
  'note',
  'test',
  'snapshot',
  'snapshots',
  'fetch',
  'journal',
  'trend',
  'baseline',
] as const;

/** Parts that `envelope.defect` may name. */
export const defectNames = ['outer', 'inner', 'rolling-element', 'cage', 'cage-rate'] as const;

const id = (description: string) =>
  z
    .string()
    .regex(idPattern)
    .meta({ description: `${description}, 1 to 32 of a-z, 0-9 and -` });
const num = (min: number, max: number, description: string) =>
  z
    .number()
    .min(min)
    .max(max)
    .meta({ description: `${description}, ${min} to ${max}` });
const int = (min: number, max: number, description: string) =>
  z
    .int()
    .min(min)
    .max(max)
    .meta({ description: `${description}, whole, ${min} to ${max}` });
const text = (max: number, description: string) => z.string().min(1).max(max).meta({ description });
const path = (description: string) => text(4000, description);
const ascending = (min: number, max: number, description: string) =>
  z
    .tuple([z.number().min(min).max(max), z.number().min(min).max(max)])
    .refine(([low, high]) => low < high, { error: 'the first must be below the second' })
    .meta({ description: `${description}: [lower, upper], within ${min} to ${max}` });
const mqttTopic = (description: string) =>
  z
    .string()
    .regex(/^[^+#\0]{1,500}$/)
    .meta({ description: `${description}, without + and #` });

const site = z
  .strictObject({
    id: id('The first level of every topic after `forebay/`'),
    name: text(200, 'For people; left out, the id').optional(),
    mains_hz: z
      .literal([50, 60])
      .default(50)
      .meta({ description: 'Frequency of the public supply in Hz, 50 or 60' }),
  })
  .meta({ description: 'The station' });

const embedded = z.strictObject({
  port: int(0, 65535, 'TCP port on loopback; 0: any free one').default(1883),
});

const broker = z
  .strictObject({
    embedded: embedded
      .optional()
      .meta({ description: 'A broker inside the agent, on loopback, for trying out. Instead of url' }),
    url: text(500, 'mqtt://, mqtts://, ws:// or wss:// with host and port').optional(),
    client_id: text(100, 'Client id at the broker; left out, `<site>-gateway`').optional(),
    protocol: z
      .literal([5, '3.1.1'])
      .optional()
      .meta({ description: 'MQTT version, 5 or 3.1.1; left out, 5 is tried first' }),
    username: text(200, 'User at the broker').optional(),
    password_file: path('File whose content is the password; the password is never written here').optional(),
    ca_file: path('PEM file of the certificate authority that the broker must be signed by').optional(),
    cert_file: path('PEM file of this gateway’s certificate, with key_file').optional(),
    key_file: path('PEM file of this gateway’s private key, with cert_file').optional(),
    keepalive_s: int(10, 65535, 'MQTT keepalive in s').default(240),
    bytes_per_day: int(10_000, 1e12, 'Ceiling for all that is sent but alarms, bytes a day').default(
      2_000_000,
    ),
    snapshot_bytes_per_day: int(0, 1e12, 'Ceiling for waveforms that somebody asks for, bytes a day').default(
      20_000_000,
    ),
  })
  .meta({ description: 'Where results go; left out, a broker inside the agent' });

const storage = z
  .strictObject({
    directory: path('Folder for the database and snapshots, locked by the running agent').default('state'),
    max_mb: int(16, 1_000_000, 'Most that the folder may hold, MB').default(512),
  })
  .meta({ description: 'Where the gateway keeps its state' });

const publish = z
  .strictObject({
    change_pct: num(0, 1000, 'A figure that moved by this much makes a reading worth sending, %').default(20),
    min_interval_s: num(0, 86_400, 'At least this long between two readings of a point, s').default(300),
    at_least_s: num(1, 604_800, 'A reading is sent at least this often, s').default(7200),
  })
  .meta({ description: 'When a reading is worth sending; a zone or defect that changes always is' });

const bandFields = {
  id: id('Name of the band, its key in the reading'),
  hz: ascending(0.1, 50_000, 'Edges in Hz').optional(),
  orders: ascending(0.05, 1000, 'Edges in multiples of shaft speed').optional(),
};
const everyS = num(0.5, 3600, 'A record starts every so often, s');
const velocityFields = {
  fmax_hz: num(1, 20_000, 'Upper edge of the velocity spectrum, Hz'),
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

const measureOverride = z
  .strictObject({
    every_s: everyS.optional(),
    velocity: z.strictObject(velocityFields).partial().optional(),
    bands: bands.optional(),
    envelope: z.strictObject(envelopeFields).partial().optional(),
  })
  .meta({ description: 'Overrides key by key; bands are replaced as a whole' });

const sensor = z
  .strictObject({
    usable_hz: ascending(0, 500_000, 'What the sensor as mounted can do, Hz').optional(),
    range_g: num(0.1, 10_000, 'Full scale of the sensor, g').optional(),
    mount: z
      .enum(['stud', 'adhesive', 'magnet', 'probe'])
      .optional()
      .meta({ description: 'How it is mounted, stud, adhesive, magnet or probe' }),
  })
  .meta({ description: 'What the figures of a channel may be trusted for' });

const columnChannel = z.strictObject({
  name: text(32, 'Name of the channel'),
  column: int(0, 63, 'Column of the line, the first is 0'),
  unit: z.enum(['g', 'm/s2', 'logic']).default('g').meta({ description: 'Physical unit, g, m/s2 or logic' }),
  scale: num(-1e9, 1e9, 'Physical units per unit of the printed number, not 0'),
  decimals: int(0, 9, 'counts = value × 10^decimals').default(0),
  range: ascending(-1e12, 1e12, 'Printed numbers at which the converter clips').optional(),
});

const sampleRate = num(10, 4_000_000, 'Nominal sample rate, Hz');

const link = z.strictObject({
  id: id('Name of the link'),
  serial: z
    .strictObject({
      path: z
        .string()
        .regex(/^\/.{1,1000}$/)
        .meta({ description: 'Absolute path of the device, such as /dev/serial/by-id/…' }),
      baud: int(300, 12_000_000, 'Line speed in baud').default(3_000_000),
    })
    .optional()
    .meta({ description: 'A serial device. Instead of tcp' }),
  tcp: z
    .strictObject({ host: text(255, 'Host name or address'), port: int(1, 65535, 'TCP port') })
    .optional()
    .meta({ description: 'A serial device server. Instead of serial' }),
  format: z
    .enum(['frames', 'columns'])
    .default('frames')
    .meta({ description: 'What the node speaks, frames or columns' }),
  expect: z
    .strictObject({
      node: int(0, 65535, 'Node number').optional(),
      serial_number: text(255, 'Serial number of the node').optional(),
      sample_rate_hz: sampleRate.optional(),
      channels: z
        .array(text(255, 'Name of a channel'))
        .min(1)
        .max(8)
        .optional()
        .meta({ description: 'Channel names in the node’s order, 1 to 8' }),
    })
    .optional()
    .meta({
      description: 'What must be at the other end (format frames); a mismatch is an alarm of the link',
    }),
  sample_rate_hz: sampleRate.optional(),
  channels: z
    .array(columnChannel)
    .min(1)
    .max(8)
    .optional()
    .meta({ description: 'Which column is what (format columns), 1 to 8' }),
  sensors: z.record(z.string().min(1).max(255), sensor).default({}).meta({ description: 'By channel name' }),
});

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

const machine = z.strictObject({
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

const levels = (fields: z.ZodNumber, description: string) =>
  z.strictObject({ alert: fields.optional(), danger: fields.optional() }).optional().meta({ description });

const rule = z.strictObject({
  id: id('Name of the rule'),
  watch: text(100, 'Path into a reading, such as velocity.overall'),
  above: levels(z.number(), 'Raised above alert and danger, in the figure’s own unit'),
  below: levels(z.number(), 'Raised below alert and danger, in the figure’s own unit'),
  zones: z.literal(true).optional().meta({ description: 'true: alert above B/C, danger above C/D' }),
  is: z
    .array(text(40, 'A value'))
    .min(1)
    .max(16)
    .optional()
    .meta({ description: 'Raised while the figure is one of these' }),
  level: z
    .enum(['alert', 'danger'])
    .optional()
    .meta({ description: 'Level of an `is` rule, alert or danger' }),
  baseline: levels(z.number().gt(1).max(1000), 'Raised above so many times the learned value'),
  rise: z
    .strictObject({
      alert_pct: num(1, 100_000, 'Rise that is an alert, %').optional(),
      danger_pct: num(1, 100_000, 'Rise that is a danger, %').optional(),
      over_days: num(0.1, 366, 'Within so many days').default(7),
    })
    .optional()
    .meta({ description: 'Raised by a rise over days' }),
  on_delay_s: num(0, 86_400, 'Sample time over the limit before it is raised, s').optional(),
  off_delay_s: num(0, 86_400, 'Sample time below it before it clears, s').default(60),
  deadband_pct: num(0, 99, 'Clears this far below the limit, % of the limit').optional(),
  deadband: num(0, 1e9, 'Clears this far below the limit, in the figure’s own unit').optional(),
  readings: z
    .tuple([z.int().min(1).max(100), z.int().min(1).max(100)])
    .refine(([k, n]) => k <= n, { error: 'the first must not be above the second' })
    .optional()
    .meta({ description: '[k, n]: holds in k of the last n readings; whole, 1 to 100' }),
  latched: z.boolean().default(false).meta({ description: 'true: stays until it is reset' }),
  points: z
    .array(text(65, 'machine/point'))
    .min(1)
    .max(512)
    .optional()
    .meta({ description: 'Points that it watches, machine/point; left out, all' }),
});

export const stationSchema = z
  .strictObject({
    site,
    broker: broker.prefault({}),
    storage: storage.prefault({}),
    publish: publish.prefault({}),
    measure: stationMeasure.prefault({}),
    links: z.array(link).min(1).max(32).meta({ description: 'Links to sensor nodes, 1 to 32' }),
    machines: z.array(machine).min(1).max(64).meta({ description: 'Machines, 1 to 64' }),
    alarms: z
      .array(rule)
      .max(64)
      .optional()
      .meta({ description: 'Alarm rules, at most 64; left out, the default set' }),
    asks: z
      .array(z.enum(askVerbs))
      .optional()
      .meta({ description: `Verbs that this station answers: ${askVerbs.join(', ')}` }),
  })
  .meta({ title: 'Forebay station', description: 'A station file' });

export type StationFile = z.output<typeof stationSchema>;

/** A file in which every key that is there has the right type, but any key may be missing. */
export type Loose<T> = T extends readonly (infer Item)[]
  ? (Loose<Item> | undefined)[]
  : T extends object
    ? { [Key in keyof T]?: Loose<T[Key]> | undefined }
    : T;
export type LooseStationFile = Loose<StationFile>;
