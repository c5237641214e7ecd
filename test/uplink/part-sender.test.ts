/** The sender of binary parts against a connection that acknowledges when it is told to. */
import { describe, expect, it, vi } from 'vitest';
import { type Connection, PublishRefused } from '../../src/uplink/connection.ts';
import { PartSender, type PartTransfer, type TransferTrouble } from '../../src/uplink/part-sender.ts';

interface Flight {
  topic: string;
  acknowledge(reason?: number): Promise<void>;
  fail(error: Error): Promise<void>;
}

/** Lets what waits on promises go on. */
const settle = () => new Promise<void>((resolve) => setImmediate(resolve));

function rig() {
  const state = { alarm: false, room: 100, left: 1e6, progressed: 0 };
  const log: string[] = [];
  const sender = new PartSender(
    {
      topic: (askId, part) => `${askId}/${part}`,
      alarmUnderWay: () => state.alarm,
      otherBytes: () => 0,
      roomFor: () => state.room,
      leftTodayBytes: () => state.left,
      published: (bytes) => {
        state.left -= bytes;
      },
      progressed: () => {
        state.progressed++;
      },
    },
    { ackTimeoutMs: 1000, slowestBytesPerS: 1000 },
  );
  const connect = () => {
    const flights: Flight[] = [];
    const connection = {
      isUp: true,
      publish: (topic: string) => {
        log.push(topic);
        return new Promise<number>((resolve, reject) => {
          const end = async (how: () => void) => {
            flights.splice(flights.indexOf(flight), 1);
            how();
            await settle();
          };
          const flight: Flight = {
            topic,
            acknowledge: (reason = 0) => end(() => resolve(reason)),
            fail: (error) => end(() => reject(error)),
          };
          flights.push(flight);
        });
      },
    };
    sender.attach(connection as unknown as Connection);
    return { connection, flights };
  };
  const ended = new Map<string, TransferTrouble | null>();
  const add = (askId: string, parts: number, changes: Partial<PartTransfer> = {}) => {
    sender.add({
      askId,
      parts: Array.from({ length: parts }, (_, part) => part),
      read: async () => Buffer.alloc(100),
      ended: (trouble) => ended.set(askId, trouble),
      ...changes,
    });
    return settle();
  };
  return { sender, state, log, connect, add, ended };
}

describe('the sender of parts', () => {
  it('ends all that is under way when it is stopped', async () => {
    const { sender, connect, add, ended } = rig();
    const { flights } = connect();
    await add('a', 4);
    await add('b', 4);
    sender.stop();
    expect([...ended].map(([id, trouble]) => [id, trouble?.kind])).toEqual([
      ['a', 'cancelled'],
      ['b', 'cancelled'],
    ]);
    for (const flight of [...flights]) await flight.acknowledge();
    expect([sender.busy, sender.inFlight, ended.size]).toEqual([false, 0, 2]);
  });

  it('keeps two in flight and ends when all are acknowledged', async () => {
    const { sender, connect, add, ended, log } = rig();
    const { flights } = connect();
    await add('a', 4);
    expect(flights.map(({ topic }) => topic)).toEqual(['a/0', 'a/1']);
    expect([sender.busy, sender.inFlight, sender.inFlightBytes]).toEqual([true, 2, 200]);
    await flights[0]!.acknowledge();
    expect(flights.map(({ topic }) => topic)).toEqual(['a/1', 'a/2']);
    while (flights.length > 0) await flights[0]!.acknowledge();
    expect(log).toEqual(['a/0', 'a/1', 'a/2', 'a/3']);
    expect(ended.get('a')).toBeNull();
    expect(sender.busy).toBe(false);
  });

  it('lets several transfers take turns, and a fifth wait outside', async () => {
    const { sender, connect, add, log } = rig();
    const { flights } = connect();
    for (const id of ['a', 'b', 'c', 'd']) await add(id, 2);
    expect(sender.full).toBe(true);
    while (flights.length > 0) await flights[0]!.acknowledge();
    expect(log.slice(2).sort()).toEqual(['b/0', 'b/1', 'c/0', 'c/1', 'd/0', 'd/1']);
    expect(new Set(log.slice(2, 5).map((topic) => topic[0]))).toEqual(new Set(['b', 'c', 'd']));
  });

  it('begins none while an alarm is on its way, nor where the broker takes no more', async () => {
    const { sender, state, connect, add, log } = rig();
    const { flights } = connect();
    state.alarm = true;
    await add('a', 3);
    expect(log).toEqual([]);
    state.alarm = false;
    state.room = 0;
    sender.kick();
    await settle();
    expect(log).toEqual([]);
    state.room = 1;
    sender.kick();
    await settle();
    await flights[0]!.acknowledge();
    expect(log.length).toBeGreaterThan(1);
  });

  it('sends again, after a cut, what was in flight and nothing else', async () => {
    const { sender, connect, add, log, ended } = rig();
    const first = connect();
    await add('a', 5);
    await first.flights[0]!.acknowledge();
    const flying = [...first.flights];
    sender.detach();
    for (const flight of flying) await flight.fail(new Error('the connection ended'));
    expect(ended.size).toBe(0);
    const second = connect();
    await settle();
    while (second.flights.length > 0) await second.flights[0]!.acknowledge();
    expect(log.slice(0, 3)).toEqual(['a/0', 'a/1', 'a/2']);
    expect(log.slice(3).sort()).toEqual(['a/1', 'a/2', 'a/3', 'a/4']);
    expect(ended.get('a')).toBeNull();
  });

  it('stops where nobody listens, which MQTT 5 says in the acknowledgement (PUBACK 0x10, 3.4.2.1)', async () => {
    const { connect, add, log, ended } = rig();
    const { flights } = connect();
    await add('a', 9);
    await flights[0]!.acknowledge(0x10);
    expect(ended.get('a')?.kind).toBe('nobody-listens');
    while (flights.length > 0) await flights[0]!.acknowledge(0x10);
    expect(log).toEqual(['a/0', 'a/1']);
  });

  it('stops when it is cancelled, or when the budget of the day is spent, and lets readings go on', async () => {
    const { sender, state, connect, add, ended } = rig();
    const { flights } = connect();
    await add('a', 9);
    expect(sender.cancel('b')).toBe(false);
    const before = state.progressed;
    expect(sender.cancel('a')).toBe(true);
    expect(ended.get('a')?.kind).toBe('cancelled');
    expect(state.progressed).toBeGreaterThan(before);
    while (flights.length > 0) await flights[0]!.acknowledge();
    state.left = 250;
    await add('c', 9);
    while (flights.length > 0) await flights[0]!.acknowledge();
    expect(ended.get('c')?.kind).toBe('budget');
    expect(sender.busy).toBe(false);
  });

  it('tries again what the broker has no room for, and gives up where it goes on so', async () => {
    vi.useFakeTimers({ toFake: ['setTimeout', 'clearTimeout'] });
    try {
      const { connect, add, ended, log } = rig();
      const { flights } = connect();
      await add('a', 1);
      for (let round = 0; round < 5; round++) {
        await flights[0]!.fail(new PublishRefused(0x97, 'quota exceeded'));
        vi.advanceTimersByTime(1000);
        await settle();
      }
      expect(log).toHaveLength(5);
      expect(ended.get('a')).toMatchObject({ kind: 'failed', reason: 'quota exceeded' });
    } finally {
      vi.useRealTimers();
    }
  });

  it('ends where the file is gone', async () => {
    const { connect, add, ended } = rig();
    connect();
    await add('a', 2, { read: () => Promise.reject(new Error('no such file')) });
    await settle();
    expect(ended.get('a')).toMatchObject({ kind: 'failed', reason: 'no such file' });
  });
});
