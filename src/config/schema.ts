/**
 * The station file, as it is written: keys, types, ranges and defaults, each key with its meaning. The JSON Schema
 * for editors is generated from this. What concerns more than one key (references, exclusive keys, physical
 * sense) is checked in check-*.ts, so that a file's mistakes are all found in one go.
 */

import { z } from 'zod';
import { ascending, id, int, num, path, text } from './schema-fields.ts';
import { machineSchema } from './schema-machines.ts';
import { stationMeasure } from './schema-measure.ts';

/** The verbs of `ask/<verb>`. */
const askVerbs = [
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
  baseline: levels(
    z.number().gt(0).max(1000),
    'Raised above so many times the learned value; of less than 1, below that share of it',
  ),
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
    machines: z.array(machineSchema).min(1).max(64).meta({ description: 'Machines, 1 to 64' }),
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
