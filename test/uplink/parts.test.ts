// Packet guard, byte ledger, asks and drainer by themselves.
import { EventEmitter, once } from 'node:events';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { localStore } from '../../src/store/local-store.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import { messageClasses, type Store } from '../../src/store/types.ts';
import { type AskCounters, AskDispatcher, noAsks } from '../../src/uplink/asks.ts';
import { ByteLedger, type Meter } from '../../src/uplink/byte-ledger.ts';
import { type Connection, PublishRefused } from '../../src/uplink/connection.ts';
import { OutboxDrainer } from '../../src/uplink/outbox-drainer.ts';
import { PacketGuard } from '../../src/uplink/packet-guard.ts';
import { agentBlock, brokerKept } from '../../src/uplink/retained.ts';
import { until } from '../support/broker-rig.ts';
import { message, roomyLimits } from '../support/store.ts';

describe('the packet guard', () => {
  /** A PUBLISH of QoS 0 on the topic `t`; the length in sevens of bits, the lowest first (MQTT 5, 1.5.5). */
  const publish = (size: number) => {
    const length: number[] = [];
    for (let left = size + 3; length.length === 0 || left > 0; left = Math.floor(left / 128)) {
      length.push((left % 128) + (left >= 128 ? 128 : 0));
    }
    return Buffer.concat([Buffer.from([0x30, ...length, 0, 1, 0x74]), Buffer.alloc(size)]);
  };
  const pingreq = Buffer.from([0xc0, 0]);
  const stream = (sizes: readonly number[]) => Buffer.concat([...sizes.map(publish), pingreq]);

  /** What goes on of a stream that comes in these pieces, and how many packets were too large. */
  const through = (most: number, bytes: Buffer, edges: readonly number[]) => {
    let oversized = 0;
    const guard = new PacketGuard(most, () => oversized++);
    const pieces = edges.map((edge, i) => guard.filter(bytes.subarray(edges[i - 1] ?? 0, edge)));
    return { oversized, out: Buffer.concat(pieces.map((piece) => piece!)) };
  };
  const byteByByte = (bytes: Buffer) => Array.from(bytes, (_, i) => i + 1);

  it('lets packets pass up to the size agreed and not one byte more, wherever the stream is split', () => {
    const bytes = stream([0, 5, 121, 122, 123, 300, 124, 125]);
    const largest = publish(300).length;
    // Of one that is a byte too large goes on what fits with a header of five bytes; the rest as it came.
    const cut = Buffer.concat([
      ...[0, 5, 121, 122, 123].map(publish),
      publish(largest - 1 - 5 - 3),
      ...[124, 125].map(publish),
      pingreq,
    ]);
    const holds = (edges: readonly number[]) => {
      expect(through(largest, bytes, edges)).toEqual({ oversized: 0, out: bytes });
      expect(through(largest - 1, bytes, edges)).toEqual({ oversized: 1, out: cut });
    };
    holds(byteByByte(bytes));
    fc.assert(
      fc.property(fc.array(fc.nat(bytes.length), { maxLength: 12 }), (cuts) =>
        holds([...cuts.toSorted((a, b) => a - b), bytes.length]),
      ),
      { seed: 11, numRuns: 200 },
    );
  });

  it('keeps type, QoS, topic and packet identifier of a message that it cuts short', () => {
    // PUBLISH of QoS 1, retained: flags 3, the identifier after the topic (MQTT 3.1.1, 3.3.1 and 3.3.2).
    const body = Buffer.concat([Buffer.from([0, 1, 0x74, 0x12, 0x34]), Buffer.alloc(500, 0x78)]);
    const bytes = Buffer.concat([Buffer.from([0x33, 0xf9, 0x03]), body, pingreq]);
    const expected = Buffer.concat([Buffer.from([0x33, 95]), body.subarray(0, 95), pingreq]);
    for (const edges of [[bytes.length], byteByByte(bytes)])
      expect(through(100, bytes, edges)).toEqual({ oversized: 1, out: expected });
  });

  it('drops whole what is too large and no message', () => {
    // SUBACK of 300 bytes (MQTT 3.1.1, 3.9).
    const bytes = Buffer.concat([publish(5), Buffer.from([0x90, 0xac, 0x02]), Buffer.alloc(300), pingreq]);
    const expected = Buffer.concat([publish(5), pingreq]);
    for (const edges of [[bytes.length], byteByByte(bytes)])
      expect(through(100, bytes, edges)).toEqual({ oversized: 1, out: expected });
  });

  it('gives up on a length that does not end', () => {
    const guard = new PacketGuard(1e9, () => undefined);
    expect(guard.filter(Buffer.from([0x30, 0xff, 0xff, 0xff, 0xff, 1]))).toBeNull();
  });

  it('tells of it at the header, before the bytes come', () => {
    // Remaining length 2 097 151 in three bytes (MQTT 5, 1.5.5).
    const header = Buffer.from([0x30, 0xff, 0xff, 0x7f]);
    expect(through(1000, header, [4]).oversized).toBe(1);
  });
});

describe('the byte ledger', () => {
  const meter = { sent: 0, received: 0, packetsOut: 0, packetsIn: 0 };
  const counters: Meter = {
    sentBytes: () => meter.sent,
    receivedBytes: () => meter.received,
    sentPackets: () => meter.packetsOut,
    receivedPackets: () => meter.packetsIn,
  };
  const books = (ledger: ByteLedger) =>
    Object.fromEntries(
      ledger.lines().map(({ class: name, sentBytes, receivedBytes }) => [name, [sentBytes, receivedBytes]]),
    );

  it('books a message under its class and the rest under the link, headers of IP and TCP included', () => {
    Object.assign(meter, { sent: 0, received: 0, packetsOut: 0, packetsIn: 0 });
    const ledger = new ByteLedger(100_000, 0, () => 10);
    ledger.follow(counters);
    ledger.published('reading', 900);
    // 100 bytes of TLS about the packet, an acknowledgement of 40; a segment each way, and one of headers for each.
    Object.assign(meter, { sent: 1000, received: 40, packetsOut: 1, packetsIn: 1 });
    expect(books(ledger)).toEqual({ reading: [900, 0], link: [100 + 104, 40 + 104] });
    expect(ledger.leftBytes()).toBe(100_000 - 900 - 204 - 144);
    // 4000 bytes are three segments of 1360.
    Object.assign(meter, { sent: 5000, packetsOut: 2 });
    ledger.published('alarm', 4000);
    expect(books(ledger).alarm).toEqual([4000, 0]);
    expect(books(ledger).link![0]).toBe(204 + 3 * 52);
  });

  it('stops what can wait at nine tenths, all but alarms at the ceiling, and begins anew after 24 h of run time', () => {
    let nowS = 86_400 * 3 + 5;
    const ledger = new ByteLedger(1000, 0, () => nowS);
    ledger.published('alarm', 5000);
    expect(ledger.leftBytes()).toBe(1000);
    expect(ledger.allowedClasses()).toEqual(messageClasses);
    ledger.published('reading', 900);
    expect(ledger.allowedClasses()).toEqual(['alarm', 'answer', 'state', 'finding']);
    ledger.published('state', 100);
    expect(ledger.allowedClasses()).toEqual(['alarm']);
    ledger.published('state', 100);
    expect(ledger.leftBytes()).toBe(0);
    const kept = ledger.lines();
    nowS += 86_400;
    expect(ledger.day).toBe(4);
    expect(ledger.leftBytes()).toBe(1000);
    const restarted = new ByteLedger(1000, 0, () => 86_400 * 3 + 50);
    restarted.restore(kept);
    expect(restarted.allowedClasses()).toEqual(['alarm']);
    const nextDay = new ByteLedger(1000, 0, () => nowS);
    nextDay.restore(kept);
    expect(nextDay.leftBytes()).toBe(1000);
  });
});

describe('asks', () => {
  let nowS = 0;
  const make = (enabled = ['readings', 'note']) => {
    const answers: [string, Record<string, unknown>][] = [];
    const asks = new AskDispatcher(
      enabled,
      {
        answer: async (id, body) => void answers.push([id, body]),
        log: () => undefined,
        monotonicS: () => nowS,
      },
      noAsks(),
    );
    asks.handle('readings', () => ({ points: 3 }));
    const take = (verb: string, body: unknown, retained = false) =>
      asks.take(
        verb,
        Buffer.isBuffer(body) ? body : Buffer.from(typeof body === 'string' ? body : JSON.stringify(body)),
        retained,
      );
    return { asks, answers, take };
  };

  it.each(['a', 'x'.repeat(65), 'sp ace', '../up', 'a/b', 'ä-umlaut', '', 5, null])(
    'with the id %j are not answered',
    async (id) => {
      const { asks, answers, take } = make();
      await take('readings', { id });
      expect(answers).toEqual([]);
      expect(asks.counters).toEqual({ done: 0, refused: 0, ignored: 1 });
    },
  );

  it('that are retained or repeated are ignored', async () => {
    const { asks, answers, take } = make();
    await take('readings', { id: 'retained' }, true);
    await take('readings', { id: 'once' });
    await take('readings', { id: 'once' });
    expect(answers).toEqual([['once', { ask: 'once', ok: true, points: 3 }]]);
    expect(asks.counters).toEqual({ done: 1, refused: 0, ignored: 2 });
  });

  it('that are too large, of no known verb, or named like a method of an object are refused', async () => {
    const { answers, take } = make(['readings', 'constructor', '__proto__']);
    await take('readings', { id: 'large', pad: 'x'.repeat(4096) });
    await take('explode', { id: 'unknown' });
    await take('constructor', { id: 'sly-1' });
    await take('__proto__', { id: 'sly-2' });
    expect(answers.map(([, body]) => body.error)).toEqual([
      expect.stringContaining('4096 bytes'),
      'there is no such ask',
      'there is no such ask',
      'there is no such ask',
    ]);
  });

  it('that come too fast are refused, then not even that, and taken again after a while', async () => {
    nowS = 0;
    const { asks, answers, take } = make();
    for (let k = 0; k < 200; k++) await take('readings', { id: `fast-${k}` });
    expect(asks.counters).toEqual({ done: 10, refused: 60, ignored: 130 });
    expect(answers.at(-1)).toEqual([
      'fast-69',
      { ask: 'fast-69', ok: false, error: 'too many asks: wait a few seconds' },
    ]);
    nowS = 3;
    for (let k = 0; k < 5; k++) await take('readings', { id: `slow-${k}` });
    expect(asks.counters.done).toBe(13);
  });

  it('may be under way four at a time', async () => {
    nowS = 0;
    const { asks, answers, take } = make(['note']);
    const gate = new EventEmitter();
    asks.handle('note', async () => {
      await once(gate, 'open');
      return {};
    });
    const all = Array.from({ length: 6 }, (_, k) =>
      take('note', { id: `note-${k}`, machine: 'pump-1', by: 'Ada', text: 'x' }),
    );
    await until(() => answers.length === 2, 'the refusals');
    expect(answers.map(([, body]) => body.error)).toEqual(Array(2).fill('too many asks at the same time'));
    gate.emit('open');
    await Promise.all(all);
    expect(asks.counters.done).toBe(4);
  });

  it('of any bytes never throw, and memory of their ids is bounded', async () => {
    nowS = 0;
    const { asks, answers, take } = make();
    let sent = 0;
    await fc.assert(
      fc.asyncProperty(
        fc.constantFrom('readings', 'note', 'toString', ''),
        fc.oneof(
          fc.uint8Array({ maxLength: 200 }).map((bytes) => Buffer.from(bytes)),
          fc.json(),
          fc.json().map((text) => `{"id":"id-${text.length}",${text}`),
        ),
        async (verb, body) => {
          nowS += 60;
          sent++;
          await take(verb, body);
        },
      ),
      { seed: 7, numRuns: 3000 },
    );
    const counters: AskCounters = asks.counters;
    expect(counters.done + counters.refused + counters.ignored).toBe(sent);
    expect(answers.length).toBe(counters.done + counters.refused);
    expect(counters.refused).toBeGreaterThan(10);
  });
});

describe('the outbox drainer', () => {
  interface Sent {
    topic: string;
    settle: (error?: Error) => void;
  }

  const make = (changes = {}) => {
    const store = localStore(new MemoryStore(roomyLimits, () => 0));
    const sent: Sent[] = [];
    const connection = (receiveMaximum: number): Connection =>
      ({
        receiveMaximum,
        maxPacketBytes: null,
        isUp: true,
        publish: (topic: string) =>
          new Promise<void>((resolve, reject) => {
            sent.push({ topic, settle: (error) => (error === undefined ? resolve() : reject(error)) });
          }),
      }) as unknown as Connection;
    const relieved = { times: 0 };
    const beside = { messages: 0, bytes: 0 };
    const drainer = new OutboxDrainer(
      {
        store,
        allowedClasses: () => messageClasses,
        published: () => undefined,
        beside: () => beside,
        settled: () => undefined,
        relieved: () => void relieved.times++,
        log: () => undefined,
      },
      {
        maxInFlight: 16,
        maxPacketBytes: 1e6,
        ackTimeoutMs: 1000,
        slowestBytesPerS: 1000,
        quotaPauseMs: 30,
        steadyMs: 40,
        nextChanceMs: 200,
        ...changes,
      },
    );
    const hangUp = async () => {
      const before = sent.length;
      drainer.attach(connection(10));
      await until(() => sent.length > before, 'the message');
      await drainer.detach({ kind: 'closed', error: new Error('the broker hung up') });
    };
    return { store, sent, connection, drainer, relieved, beside, hangUp };
  };

  it('keeps within what both sides take, one message a topic', async () => {
    const { store, sent, connection, drainer } = make();
    await store.commit({
      outbox: Array.from({ length: 40 }, (_, i) => message(i + 1, { topic: `t/${i % 30}` })),
    });
    drainer.attach(connection(3));
    await until(() => sent.length === 3, 'three messages');
    await new Promise((resolve) => setTimeout(resolve, 20));
    expect(sent.map(({ topic }) => topic)).toEqual(['t/0', 't/1', 't/2']);
    sent[0]!.settle();
    await until(() => sent.length === 4, 'the next');
    expect(sent[3]!.topic).toBe('t/3');
    const second = make();
    await second.store.commit({
      outbox: Array.from({ length: 40 }, (_, i) => message(i + 1, { topic: `t/${i % 30}` })),
    });
    second.drainer.attach(second.connection(65_535));
    await until(() => second.sent.length === 16, 'sixteen messages');
    await new Promise((resolve) => setTimeout(resolve, 20));
    expect(second.sent).toHaveLength(16);
  });

  for (const code of [0x83, 0x97]) {
    it(`tries again after reason ${code.toString(16)}`, async () => {
      const { store, sent, connection, drainer } = make();
      await store.commit({ outbox: [message(1)] });
      drainer.attach(connection(10));
      await until(() => sent.length === 1, 'the message');
      sent[0]!.settle(new PublishRefused(code, 'later'));
      await until(() => sent.length === 2, 'the message again');
      sent[1]!.settle();
      await until(async () => (await store.counters()).outbox.rows === 0, 'the end');
      expect((await store.counters()).setAside.rows).toBe(0);
    });
  }

  it('takes no notice of an acknowledgement that an old connection brings', async () => {
    const { store, sent, connection, drainer } = make();
    await store.commit({ outbox: [message(1, { topic: 'a' })] });
    drainer.attach(connection(10));
    await until(() => sent.length === 1, 'the message');
    await drainer.detach({ kind: 'lost', error: new Error('gone') });
    drainer.attach(connection(10));
    await until(() => sent.length === 2, 'the message again');
    sent[0]!.settle(new PublishRefused(0x87, 'not authorized'));
    await new Promise((resolve) => setTimeout(resolve, 20));
    expect((await store.counters()).setAside.rows).toBe(0);
    expect(drainer.inFlight).toBe(1);
    sent[1]!.settle();
    await until(async () => (await store.counters()).outbox.rows === 0, 'the end');
  });

  it('does not suspect a message of what the link did', async () => {
    const { store, sent, connection, drainer } = make();
    await store.commit({ outbox: [message(1)] });
    for (let round = 1; round <= 20; round++) {
      drainer.attach(connection(10));
      await until(() => sent.length === round, 'the message');
      await drainer.detach({ kind: 'lost', error: new Error('no answer in time') });
    }
    const [row] = await store.batch({ max: 9, busyTopics: [], classes: messageClasses });
    expect(row?.tries).toBe(0);
  });

  it('sets a message aside over which the broker hung up eight times, and says so once', async () => {
    const { store, sent, connection, drainer, relieved } = make();
    await store.commit({ outbox: [message(1)] });
    for (let round = 1; round <= 8; round++) {
      expect(relieved.times).toBe(0);
      drainer.attach(connection(10));
      await until(() => sent.length === round, 'the message');
      await drainer.detach({ kind: 'closed', error: new Error('the broker hung up') });
    }
    expect(relieved.times).toBe(1);
    expect((await store.counters()).setAside.rows).toBe(1);
  });

  const asideRows = async (store: Store) => (await store.counters()).setAside.rows;
  const quiet = () => new Promise((resolve) => setTimeout(resolve, 60));

  it('sends an alarm that was set aside for that again, alone, once a connection held and nothing else waits', async () => {
    const { store, sent, connection, drainer, hangUp } = make();
    await store.commit({ outbox: [message(1, { topic: 'first' })] });
    for (let round = 1; round <= 8; round++) await hangUp();
    expect(await asideRows(store)).toBe(1);
    await store.commit({ outbox: [message(2, { topic: 'second' })] });
    drainer.attach(connection(10));
    await until(() => sent.length === 9, 'the other message');
    await quiet();
    drainer.kick();
    await quiet();
    expect(sent.at(-1)!.topic).toBe('second');
    sent[8]!.settle();
    await until(() => sent.length === 10, 'the one set aside');
    expect(sent[9]!.topic).toBe('first');
    await store.commit({ outbox: [message(3, { topic: 'third' })] });
    drainer.kick();
    await quiet();
    expect(sent).toHaveLength(10);
    sent[9]!.settle();
    await until(() => sent.length === 11, 'what came meanwhile');
    sent[10]!.settle();
    await until(async () => (await store.counters()).outbox.rows === 0, 'the end');
    expect(await asideRows(store)).toBe(0);
  });

  it('sends it not before the connection held, and after a chance that failed not for a while', async () => {
    const { store, sent, connection, drainer, hangUp, relieved } = make();
    await store.commit({ outbox: [message(1)] });
    for (let round = 1; round <= 8; round++) await hangUp();
    drainer.attach(connection(10));
    drainer.kick();
    await new Promise((resolve) => setTimeout(resolve, 10));
    expect(await asideRows(store)).toBe(1);
    await quiet();
    drainer.kick();
    await until(() => sent.length === 9, 'the chance');
    await drainer.detach({ kind: 'closed', error: new Error('the broker hung up') });
    expect(relieved.times).toBe(2);
    expect((await store.counters()).setAside.latest?.reason).toBe('the broker hung up 9 times over it');
    drainer.attach(connection(10));
    await quiet();
    drainer.kick();
    await quiet();
    expect(sent).toHaveLength(9);
    await new Promise((resolve) => setTimeout(resolve, 200));
    drainer.kick();
    await until(() => sent.length === 10, 'the next chance');
  });

  it('sets nothing aside for a hang-up while more than it was in flight', async () => {
    const { store, hangUp, beside } = make();
    await store.commit({ outbox: [message(1)] });
    beside.messages = 2;
    for (let round = 1; round <= 10; round++) await hangUp();
    expect(await asideRows(store)).toBe(0);
    beside.messages = 0;
    await hangUp();
    expect(await asideRows(store)).toBe(1);
  });

  it('rests when the store fails, and goes on afterwards', async () => {
    const { store, sent, connection, drainer } = make();
    await store.commit({ outbox: [message(1)] });
    const accept = store.accept;
    let failures = 0;
    store.accept = async () => {
      failures++;
      throw new Error('disk full');
    };
    drainer.attach(connection(10));
    await until(() => sent.length === 1, 'the message');
    sent[0]!.settle();
    await until(() => sent.length === 2, 'the message again');
    expect(failures).toBe(1);
    store.accept = accept;
    sent[1]!.settle();
    await until(async () => (await store.counters()).outbox.rows === 0, 'the end');
  });
});

describe('what the broker still retains', () => {
  const last = { first: 100, used: 3 };
  const marker = (state: string, id: string) => Buffer.from(JSON.stringify({ state, id }));
  it.each([
    ['the will of the last connection', marker('offline', `abcdef-${100 + agentBlock - 1}`), last, true],
    ['nothing', null, last, false],
    ['online still: the broker died before the agent', marker('online', 'abcdef-100'), last, false],
    ['an older goodbye: it fell back', marker('offline', 'abcdef-99'), last, false],
    ['that of another store', marker('offline', 'zzzzzz-163'), last, false],
    ['no JSON', Buffer.from('?'), last, false],
    ['null', Buffer.from('null'), last, false],
    ['anything at the first connection of a run', marker('offline', 'abcdef-163'), null, false],
  ])('%s', (_, payload, block, kept) => {
    expect(brokerKept(payload, 'abcdef', block)).toBe(kept);
  });
});
