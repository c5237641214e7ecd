/** The shape of every payload, in and out: asks are checked by it, and `config/payloads.schema.json` is made from it. */

import { z } from 'zod';

const id = z.string().regex(/^[a-z0-9]{4,}-\d+$/);
const time = z.iso.datetime();
const figure = z.number().nullable();
const count = z.int().nonnegative();
const band = z.tuple([z.number(), z.number()]);
const zone = z.enum(['A', 'B', 'C', 'D']).nullable();
const level = z.enum(['alert', 'danger']);

const bearingLine = z
  .looseObject({
    expected_hz: z.number(),
    hz: figure,
    line: figure,
    over_floor_db: figure,
    modulation: figure,
    harmonics: count,
  })
  .nullable();

const order = z.looseObject({ mm_s: figure, deg: figure });
const tone = z.looseObject({ hz: figure, mm_s: figure }).nullable();

const reading = z.looseObject({
  id,
  t: time,
  quality: z.enum(['good', 'uncertain', 'bad']),
  why: z.array(z.string()),
  first_index: count,
  rate: z.looseObject({
    hz: figure,
    source: z.enum(['nominal', 'measured', 'given']),
    ppm: figure,
  }),
  running: z.boolean().nullable(),
  shaft: z.looseObject({
    hz: figure,
    source: z.enum(['spectrum', 'tachometer', 'mqtt', 'configured']).nullable(),
  }),
  velocity: z.object({ unit: z.literal('mm/s'), overall: figure }).catchall(figure),
  displacement: z.looseObject({ unit: z.literal('µm'), rms: figure, p2p: figure }),
  orders: z.looseObject({ 1: order, 2: order, 3: order }),
  tones: z.looseObject({ vane_pass: tone, twice_mains: tone }).optional(),
  acceleration: z.looseObject({
    unit: z.literal('g'),
    band_hz: band,
    rms: figure,
    peak: figure,
    crest: figure,
    kurtosis: figure,
    mean_hz: figure.optional(),
  }),
  envelope: z
    .looseObject({
      unit: z.literal('g²'),
      band_hz: band,
      mean: figure,
      floor: figure,
      defect: z.enum(['outer', 'inner', 'rolling-element', 'cage', 'cage-rate']).nullable(),
      bearing: z.string().optional(),
      bpfo: bearingLine,
      bpfi: bearingLine,
      bsf: bearingLine,
      ftf: bearingLine,
    })
    .nullable(),
  zone,
});

const alarm = z.looseObject({
  id,
  t: time,
  state: z.enum([
    'normal',
    'unacknowledged',
    'acknowledged',
    'returned-unacknowledged',
    'shelved',
    'suppressed-by-design',
    'out-of-service',
  ]),
  level: level.nullable(),
  value: z.union([z.number(), z.string()]).nullable(),
  limit: figure,
  unit: z.string().nullable(),
  raised: id.nullable(),
  since: time.nullable(),
  acknowledged_by: z.string().nullable(),
  reason: z.string(),
  check: z.string(),
  snapshot: z.string().nullable(),
  test: z.literal(true).optional(),
});

const state = z.looseObject({
  id,
  t: time,
  running: z.boolean().nullable(),
  since: time.nullable(),
  hours_run: z.number().nonnegative(),
  starts_today: count,
  severity: z.union([z.literal(0), z.literal(1), z.literal(2), z.literal(3)]),
  zone,
  worst: z.string().nullable(),
  unacknowledged: count,
  finding: z.string().nullable(),
});

const finding = z.looseObject({
  id,
  t: time,
  findings: z.array(
    z.looseObject({
      fault: z.string(),
      likelihood: z.string(),
      points: z.array(z.string()),
      evidence: z.array(z.string()),
      check: z.string(),
    }),
  ),
});

const agent = z.looseObject({
  id,
  t: time,
  state: z.enum(['online', 'offline']),
  version: z.string(),
  config: z.string(),
  clock: z.enum(['synchronised', 'free']),
  storage: z.enum(['ok', 'failing']),
});

const bytesByClass = z.record(z.string(), z.looseObject({ sent: count, received: count }));

/** Sections that a station cannot tell are left out; what is in a section and unknown is null. */
const health = z.looseObject({
  id,
  t: time,
  links: z.record(
    z.string(),
    z.looseObject({
      bytes_per_s: figure,
      frames: count.nullable(),
      errors: z.record(z.string(), count),
      rate: z.looseObject({ nominal_hz: figure, measured_hz: figure }).nullable(),
      gaps: count.nullable(),
      node: z.union([z.number(), z.string()]).nullable(),
    }),
  ),
  outbox: z.looseObject({
    rows: count,
    bytes: count,
    oldest_s: figure,
    by_class: z.record(z.string(), count),
    dropped: z.record(z.string(), count),
    superseded: count,
    set_aside: z.looseObject({
      rows: count,
      latest: z.looseObject({ topic: z.string(), reason: z.string() }).nullable(),
    }),
  }),
  uplink: z.looseObject({
    protocol: z.enum(['5', '3.1.1']).nullable(),
    connects: count,
    asks: z.record(z.string(), count),
    oversized: count.optional(),
    bytes_today: bytesByClass,
    left_today: count,
  }),
  disk: z.looseObject({ free_mb: figure }).optional(),
  memory: z.looseObject({ rss_mb: figure }).optional(),
  cpu: z.looseObject({ pct: figure }).optional(),
});

const askId = z.string().regex(/^[A-Za-z0-9_-]{2,64}$/);

const answer = z.looseObject({ id, ask: askId, ok: z.boolean(), error: z.string().optional() });

const by = z.string().min(1).max(80);
const alarmName = z.string().min(3).max(110);
const machineName = z.string().min(1).max(32);
const pointName = z.string().min(3).max(65);
const seconds = z.number().positive().max(3600);
const target = z
  .looseObject({
    id: askId,
    alarm: alarmName.optional(),
    point: pointName.optional(),
    machine: machineName.optional(),
    by,
    why: z.string().min(1).max(400),
  })
  .refine((ask) => [ask.alarm, ask.point, ask.machine].filter((name) => name !== undefined).length === 1, {
    message: 'one of alarm, point, machine is needed',
  });

/** By verb. What else an ask carries is ignored. */
export const askSchemas = {
  readings: z.looseObject({ id: askId }),
  acknowledge: z.looseObject({ id: askId, alarm: alarmName, raised: id.optional(), by }),
  shelve: z.looseObject({ id: askId, alarm: alarmName, by, minutes: z.number().positive().max(43_200) }),
  unshelve: z.looseObject({ id: askId, alarm: alarmName, by }),
  'out-of-service': target,
  'in-service': target,
  reset: z.looseObject({ id: askId, alarm: alarmName, by }),
  note: z.looseObject({ id: askId, machine: machineName, by, text: z.string().min(1).max(1000) }),
  test: z.looseObject({ id: askId, alarm: alarmName, level }),
  snapshot: z
    .looseObject({
      id: askId,
      point: pointName.optional(),
      machine: machineName.optional(),
      seconds: seconds.optional(),
    })
    .refine((ask) => (ask.point === undefined) !== (ask.machine === undefined), {
      message: 'one of point, machine is needed',
    }),
  snapshots: z.looseObject({ id: askId }),
  fetch: z.looseObject({
    id: askId,
    snapshot: z.string().min(1).max(120),
    channels: z.array(z.string().max(65)).max(16).optional(),
    from_s: z.number().nonnegative().optional(),
    seconds: seconds.optional(),
    parts: z.array(count).max(500).optional(),
    /** The id of an earlier fetch that is no longer wanted. */
    cancel: askId.optional(),
  }),
  journal: z.looseObject({ id: askId, since: z.union([time, id]).optional() }),
  trend: z.looseObject({
    id: askId,
    point: pointName,
    watch: z.string().min(1).max(80),
    from: time,
    to: time,
    points: z.int().min(1).max(500).optional(),
  }),
  baseline: z.looseObject({
    id: askId,
    machine: machineName,
    action: z.enum(['start', 'accept', 'reject', 'show']),
    /** With `start`: how long to collect, in hours of the running agent. */
    hours: z.number().positive().max(720).optional(),
    /** Only this one in the answer. */
    point: pointName.optional(),
    by: by.optional(),
  }),
} as const;

export type AskVerb = keyof typeof askSchemas;
export type Ask<V extends AskVerb> = z.infer<(typeof askSchemas)[V]>;

/** By the last part of the topic, as in README.md beside this file. */
export const payloadSchemas = { agent, health, reading, alarm, state, finding, answer } as const;

/** One JSON Schema document with all of them under `$defs`; asks as `ask-<verb>`. */
export function payloadJsonSchema(): Record<string, unknown> {
  const schemas = {
    ...payloadSchemas,
    ...Object.fromEntries(Object.entries(askSchemas).map(([verb, schema]) => [`ask-${verb}`, schema])),
  };
  const defs = Object.entries(schemas).map(([name, schema]) => {
    const { $schema: _, ...rest } = z.toJSONSchema(schema, { io: 'input' });
    return [name, rest];
  });
  return {
    $schema: 'https://json-schema.org/draft/2020-12/schema',
    title: 'Payloads of Forebay',
    $defs: Object.fromEntries(defs),
  };
}
