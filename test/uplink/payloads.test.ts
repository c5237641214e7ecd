import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import type { Reading } from '../../src/measure/reading.ts';
import { rounded } from '../../src/signal/rounded.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import { uplinkHealth } from '../../src/uplink/health.ts';
import { MessageIds } from '../../src/uplink/message-ids.ts';
import {
  emptyingMessage,
  encode,
  identifiedMessage,
  outboxMessage,
  readingBody,
  roundedFigures,
} from '../../src/uplink/payload.ts';
import { askSchemas, payloadJsonSchema, payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { topicsOf, topicTrouble } from '../../src/uplink/topics.ts';
import type { UplinkStatus } from '../../src/uplink/uplink.ts';
import { contractReading, readingOf } from '../support/readings.ts';
import { message, roomyLimits } from '../support/store.ts';

describe('rounding', () => {
  // Four significant digits: the rule of the topics; 110.36 mm/s is 10 Hz at 1 g peak.
  it.each([
    [110.3567, 110.4],
    [0.00012346, 0.0001235],
    [-9.80665, -9.807],
    [40958.24, 40960],
    [0, 0],
    [Number.NaN, null],
    [Number.POSITIVE_INFINITY, null],
  ])('makes %d %s', (value, expected) => {
    expect(rounded(value)).toBe(expected);
  });

  it('goes into lists and objects and leaves words, truths and nulls alone', () => {
    expect(roundedFigures({ a: [1.23456, null, 'x'], b: { c: true, d: Number.NaN } })).toEqual({
      a: [1.235, null, 'x'],
      b: { c: true, d: null },
    });
  });

  it('keeps the digits of the rate, and the index whole', () => {
    const reading: Reading = {
      ...readingOf(),
      first_index: 50331648,
      rate: { hz: 40958.2 + 1e-7, source: 'measured', ppm: 12.345 },
    };
    const body = readingBody('2026-03-02T10:15:30.000Z', reading);
    expect(body).toMatchObject({
      first_index: 50331648,
      rate: { hz: 40958.2, source: 'measured', ppm: 12.35 },
    });
  });
});

describe('the reading payload', () => {
  it('validates, from the first key on', () => {
    const text = encode('k3f9ab-81273', readingBody('2026-03-02T10:15:30.000Z', readingOf())).toString();
    expect(text.startsWith('{"id":"k3f9ab-81273","t":"2026-03-02T10:15:30.000Z","quality":"good"')).toBe(
      true,
    );
    expect(payloadSchemas.reading.safeParse(JSON.parse(text)).error).toBeUndefined();
  });

  it('turns what is no number into null on the wire', () => {
    const broken = readingOf();
    broken.velocity.overall = Number.NaN;
    broken.acceleration.crest = Number.POSITIVE_INFINITY;
    const sent = JSON.parse(encode('k3f9ab-1', readingBody('2026-03-02T10:15:30.000Z', broken)).toString());
    expect(sent.velocity.overall).toBeNull();
    expect(sent.acceleration.crest).toBeNull();
    expect(payloadSchemas.reading.safeParse(sent).success).toBe(true);
  });
});

describe('the schemas', () => {
  it('are those that ship', () => {
    const shipped = JSON.parse(
      readFileSync(new URL('../../config/payloads.schema.json', import.meta.url), 'utf8'),
    );
    // Build and run `node scripts/payload-schemas.mjs` when this fails.
    expect(shipped).toEqual(JSON.parse(JSON.stringify(payloadJsonSchema())));
  });

  it('accept the example reading of the topics, and miss a key that is gone, a word that is not known, a figure that is text', () => {
    expect(payloadSchemas.reading.safeParse(contractReading).error).toBeUndefined();
    const { zone: _, ...without } = contractReading;
    expect(payloadSchemas.reading.safeParse(without).success).toBe(false);
    expect(payloadSchemas.reading.safeParse({ ...contractReading, quality: 'fine' }).success).toBe(false);
    const text = { ...contractReading, velocity: { ...contractReading.velocity, low: '0.21' } };
    expect(payloadSchemas.reading.safeParse(text).success).toBe(false);
    expect(payloadSchemas.reading.safeParse({ ...contractReading, more: 1 }).success).toBe(true);
  });

  it('know every verb of the topics', () => {
    expect(Object.keys(askSchemas).toSorted()).toEqual(
      [
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
      ].toSorted(),
    );
  });
});

describe('a message', () => {
  it('takes the next number, and everything but an answer is retained', () => {
    const ids = new MessageIds('k3f9ab', 7);
    const alarm = outboxMessage(ids, 'alarm', 't', { a: 1 });
    expect(alarm).toMatchObject({ n: 7, class: 'alarm', topic: 't', qos: 1, retain: true });
    expect(Buffer.from(alarm.payload).toString()).toBe('{"id":"k3f9ab-7","a":1}');
    expect(outboxMessage(ids, 'answer', 't', {}).retain).toBe(false);
    const emptying = emptyingMessage(ids, 'state', 't');
    expect([emptying.n, emptying.retain, emptying.payload.byteLength]).toEqual([9, true, 0]);
    expect(ids.takeBlock(64)).toBe(10);
    expect(ids.nextN).toBe(74);
  });
});

describe('a message whose id was taken before', () => {
  it('has the number of its id, and the id in front', () => {
    const made = identifiedMessage('alarm', 't', { id: 'k3f9ab-41', ...{ state: 'normal' } });
    expect(made.n).toBe(41);
    expect(Buffer.from(made.payload).toString()).toBe('{"id":"k3f9ab-41","state":"normal"}');
    expect(() => identifiedMessage('alarm', 't', { id: 'k3f9ab' })).toThrow('is no id');
  });
});

describe('the health sections', () => {
  it('validate, with something in each of them', () => {
    const store = new MemoryStore(roomyLimits, () => 12.3456);
    store.commit({ outbox: [message(1), message(2, { class: 'reading' })] });
    store.reject(2, 'too large', true);
    const status: UplinkStatus = {
      connected: true,
      protocol: '5',
      connects: 2,
      inFlight: 1,
      asks: { done: 1, refused: 0, ignored: 3 },
      oversized: 2,
      bytesToday: [{ day: 1, class: 'link', sentBytes: 500, receivedBytes: 300 }],
      leftTodayBytes: 1_999_200,
    };
    const sections = uplinkHealth(status, store.counters());
    const health = { id: 'k3f9ab-1', t: '2026-03-02T10:15:30.000Z', links: {}, ...sections };
    expect(payloadSchemas.health.safeParse(health).error).toBeUndefined();
    expect(sections.outbox).toMatchObject({
      rows: 1,
      set_aside: { rows: 1, latest: { reason: 'too large' } },
    });
    expect(sections.uplink).toMatchObject({
      bytes_today: { link: { sent: 500, received: 300 } },
      left_today: 1_999_200,
    });
  });
});

describe('the topics', () => {
  const topics = topicsOf('north-weir');
  it('are those that screens are built on', () => {
    expect([
      topics.agent,
      topics.health,
      topics.reading('pump-1/motor-de-h'),
      topics.alarm('pump-1', 'motor-de-h', 'zone'),
      topics.alarm('pump-1', 'machine', 'zone'),
      topics.agentAlarm('node-1', 'sensor'),
      topics.agentAlarm('gateway', 'store'),
      topics.state('pump-1'),
      topics.finding('pump-1'),
      topics.asks,
      topics.answer('ab'),
      topics.answerPart('ab', 3),
    ]).toEqual(
      [
        'agent',
        'health',
        'pump-1/motor-de-h/reading',
        'pump-1/alarm/motor-de-h.zone',
        'pump-1/alarm/machine.zone',
        'agent/alarm/node-1.sensor',
        'agent/alarm/gateway.store',
        'pump-1/state',
        'pump-1/finding',
        'ask/+',
        'answer/ab',
        'answer/ab/3',
      ].map((rest) => `forebay/north-weir/${rest}`),
    );
    expect(topics.verbOf('forebay/north-weir/ask/readings')).toBe('readings');
    expect(topics.verbOf('forebay/south-weir/ask/readings')).toBeNull();
  });

  it.each(['', 'a/+/b', 'a/#', 'a\0b', '\ud800', 'x'.repeat(65_536)])(
    '%j would cost the connection',
    (topic) => {
      expect(topicTrouble(topic)).toMatch(/^the topic /);
    },
  );

  it('may be long and foreign', () => {
    expect(topicTrouble('ü'.repeat(32_767))).toBeNull();
    expect(topicTrouble('ü'.repeat(32_768))).toMatch(/longer/);
  });
});
