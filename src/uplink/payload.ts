import type { Reading } from '../measure/reading.ts';
import { rounded } from '../signal/rounded.ts';
import type { MessageClass, OutboxMessage } from '../store/types.ts';
import type { MessageIds } from './message-ids.ts';

/** Every number in a value rounded, however deep. */
export function roundedFigures<T>(value: T): T {
  if (typeof value === 'number') return rounded(value) as T;
  if (Array.isArray(value)) return value.map(roundedFigures) as T;
  if (typeof value !== 'object' || value === null) return value;
  return Object.fromEntries(Object.entries(value).map(([key, part]) => [key, roundedFigures(part)])) as T;
}

/** The body of the `reading` payload: rounded, but for the index (a name) and the rate, whose digits carry its ppm. */
export function readingBody(t: string, reading: Reading): Record<string, unknown> {
  const { quality, why, first_index, rate, ...figures } = reading;
  const hz = Number.isFinite(rate.hz) ? Number(rate.hz.toPrecision(9)) : null;
  const ppm = rate.ppm === null ? null : rounded(rate.ppm);
  return { t, quality, why, first_index, rate: { ...rate, hz, ppm }, ...roundedFigures(figures) };
}

/** JSON in UTF-8 with the id in front. What is no finite number becomes null. */
export function encode(id: string, body: Readonly<Record<string, unknown>>): Buffer {
  return Buffer.from(JSON.stringify({ id, ...body }));
}

/** A message for the outbox, with the next number. Everything that says how things are is retained; answers are not. */
export function outboxMessage(
  ids: MessageIds,
  name: MessageClass,
  topic: string,
  body: Readonly<Record<string, unknown>>,
): OutboxMessage {
  const n = ids.take();
  return { n, class: name, topic, payload: encode(ids.idOf(n), body), qos: 1, retain: name !== 'answer' };
}

/** Empties a retained topic. */
export function emptyingMessage(ids: MessageIds, name: MessageClass, topic: string): OutboxMessage {
  return { n: ids.take(), class: name, topic, payload: Buffer.alloc(0), qos: 1, retain: true };
}

/** A message whose payload holds an id that was taken before, as those of alarms do. */
export function identifiedMessage(
  name: MessageClass,
  topic: string,
  payload: Readonly<{ id: string }>,
): OutboxMessage {
  const { id, ...body } = payload;
  const n = Number(/-(\d+)$/.exec(id)?.[1]);
  if (!Number.isSafeInteger(n)) throw new Error(`${id} is no id of a message`);
  return { n, class: name, topic, payload: encode(id, body), qos: 1, retain: name !== 'answer' };
}
