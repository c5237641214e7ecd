// The uplink against real brokers; asserted on what a subscriber received, repeats dropped by id.
import { afterEach, describe, expect, it } from 'vitest';
import { AskRefused } from '../../src/uplink/asks.ts';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { emptyForgotten } from '../../src/uplink/retained.ts';
import { startAedes } from '../support/broker.ts';
import { ControlRoom, Rig, remoteBroker, until } from '../support/broker-rig.ts';
import { haveMosquitto, Mosquitto } from '../support/mosquitto.ts';
import { FaultyLink, sleep } from '../support/proxy.ts';

const cleanups: (() => Promise<void>)[] = [];
const later = <T>(thing: T, end: (thing: T) => Promise<void>): T => {
  cleanups.push(() => end(thing));
  return thing;
};
afterEach(async () => {
  for (const end of cleanups.splice(0).reverse()) await end();
});

async function join(port: number): Promise<ControlRoom> {
  return later(await ControlRoom.join(port), (room) => room.leave());
}

async function agentAt(port: number, protocol: 4 | 5 | null, changes = {}): Promise<Rig> {
  const rig = await Rig.make(remoteBroker(port, { protocol }), changes);
  later(rig, (made) => made.uplink.stop(400));
  return rig;
}

const agentTopic = 'forebay/north-weir/agent';

interface Kind {
  name: string;
  protocol: 4 | 5;
  present: boolean;
  port(): Promise<number>;
}

const kinds: Kind[] = [
  ...([5, 4] as const).map((protocol) => ({
    name: `mosquitto, MQTT ${protocol === 5 ? '5' : '3.1.1'}`,
    protocol,
    present: haveMosquitto,
    port: async () => later(await Mosquitto.start(), (broker) => broker.stop()).port,
  })),
  {
    name: 'aedes, MQTT 3.1.1',
    protocol: 4,
    present: true,
    port: async () => later(await startAedes(), (broker) => broker.stop()).port,
  },
];

for (const kind of kinds.filter(({ present }) => present)) {
  describe(`over ${kind.name}`, () => {
    it('delivers everything, alarms in their order, and says online and offline', async () => {
      const port = await kind.port();
      const room = await join(port);
      const rig = await agentAt(port, kind.protocol);
      const sent: string[] = [];
      for (let k = 0; k < 60; k++) sent.push(await rig.alarm(k, 3));
      sent.push(await rig.send('state', rig.uplink.topics.state('pump-1')));
      await rig.uplink.start();
      for (let k = 60; k < 90; k++) sent.push(await rig.alarm(k, 3));
      await room.hears(sent);
      await rig.empty();
      for (let subject = 0; subject < 3; subject++) {
        const topic = rig.uplink.topics.alarm('pump-1', `p${subject}`, 'zone');
        const numbers = room.ids(topic).map((id) => Number(id.split('-')[1]));
        expect(numbers).toHaveLength(30);
        expect(numbers).toEqual(numbers.toSorted((a, b) => a - b));
        expect(payloadSchemas.alarm.parse(room.last(topic))).toMatchObject({ state: 'unacknowledged' });
      }
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      expect(payloadSchemas.agent.parse(room.last(agentTopic)).clock).toBe('synchronised');
      expect(rig.uplink.status().protocol).toBe(kind.protocol === 5 ? '5' : '3.1.1');
      const onlineId = String(room.last(agentTopic)?.id);
      await rig.uplink.stop(2000);
      await until(() => room.last(agentTopic)?.state === 'offline', 'the agent to be offline');
      const offlineId = String(payloadSchemas.agent.parse(room.last(agentTopic)).id);
      expect(Number(offlineId.split('-')[1])).toBeGreaterThan(Number(onlineId.split('-')[1]));
      const latecomer = await join(port);
      await until(() => latecomer.heard.length >= 5, 'the retained messages');
      expect(latecomer.heard.every((message) => message.retained)).toBe(true);
    });

    it('stops without a warning while messages still come: they stay, and nothing follows its last word', async () => {
      const port = await kind.port();
      const room = await join(port);
      const rig = await agentAt(port, kind.protocol);
      await rig.uplink.start();
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      const before = await Promise.all(Array.from({ length: 10 }, (_, k) => rig.alarm(k)));
      let stopped = false;
      const stopping = rig.uplink.stop(2000).then(() => {
        stopped = true;
      });
      for (let k = 10; !stopped; k++) {
        await rig.alarm(k);
        await sleep(1);
      }
      await stopping;
      await until(() => room.last(agentTopic)?.state === 'offline', 'the agent to be offline');
      await room.hears(before);
      expect(room.heard.at(-1)?.topic).toBe(agentTopic);
      expect((await rig.store.counters()).outbox.rows).toBeGreaterThan(0);
      expect(rig.lines.filter(({ level }) => level !== 'info')).toEqual([]);
    });

    it('has a will that orders behind every message of the connection', async () => {
      const port = await kind.port();
      const proxy = later(await FaultyLink.start(port), (made) => made.stop());
      const room = await join(port);
      const rig = await agentAt(proxy.port, kind.protocol);
      await rig.uplink.start();
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      rig.clock = 'free';
      await rig.uplink.agentChanged();
      await until(() => room.last(agentTopic)?.clock === 'free', 'the change');
      proxy.refuse(true);
      proxy.cut();
      await until(() => room.last(agentTopic)?.state === 'offline', 'the will');
      proxy.refuse(false);
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to come back');
      const numbers = room.ids(agentTopic).map((id) => Number(id.split('-')[1]));
      expect(numbers).toHaveLength(4);
      expect(numbers).toEqual(numbers.toSorted((a, b) => a - b));
    });

    it('answers asks, refuses with a reason, and does not do a retained or repeated one', async () => {
      const port = await kind.port();
      const room = await join(port);
      const rig = await agentAt(port, kind.protocol, { asks: ['readings', 'acknowledge', 'journal'] });
      let done = 0;
      rig.uplink.handle('acknowledge', (ask) => {
        done++;
        if (ask.alarm === 'pump-1/x.zone') throw new AskRefused('that alarm has been raised again since');
        return { by: ask.by };
      });
      rig.uplink.handle('readings', () => {
        throw new Error('a bug with a secret in it');
      });
      await rig.uplink.start();
      await rig.online();
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      const ask = (verb: string, body: unknown, retain = false) =>
        room.client.publishAsync(
          `forebay/north-weir/ask/${verb}`,
          typeof body === 'string' ? body : JSON.stringify(body),
          {
            qos: 1,
            retain,
          },
        );
      const answer = async (id: string) => {
        const topic = rig.uplink.topics.answer(id);
        await until(() => room.last(topic) !== null, `an answer to ${id}`);
        return payloadSchemas.answer.parse(room.last(topic));
      };
      await ask('acknowledge', { id: 'ask_1', alarm: 'pump-1/de.zone', by: 'Ada' });
      expect(await answer('ask_1')).toMatchObject({ ask: 'ask_1', ok: true, by: 'Ada' });
      await ask('acknowledge', { id: 'ask_1', alarm: 'pump-1/de.zone', by: 'Ada' });
      await ask('acknowledge', { id: 'ask_2', alarm: 'pump-1/x.zone', by: 'Ada' });
      expect(await answer('ask_2')).toMatchObject({
        ok: false,
        error: 'that alarm has been raised again since',
      });
      await ask('acknowledge', { id: 'ask_3', alarm: 'pump-1/x.zone' });
      expect((await answer('ask_3')).error).toBe('by is missing');
      await ask('readings', { id: 'ask_4' });
      expect((await answer('ask_4')).error).toBe('it failed inside the agent; see its log');
      await ask('shelve', { id: 'ask_5', alarm: 'a/b.c', by: 'x', minutes: 5 });
      expect((await answer('ask_5')).error).toBe('shelve is not enabled at this station');
      await ask('journal', { id: 'ask_6' });
      expect((await answer('ask_6')).error).toBe('journal is not available yet');
      await ask('readings', '{"id":"ask_7", broken');
      expect((await answer('ask_7')).error).toBe('the payload is not a JSON object');
      expect(
        room.heard.filter((message) => message.topic === rig.uplink.topics.answer('ask_1')),
      ).toHaveLength(1);
      expect(room.heard.filter((m) => m.topic.includes('/answer/')).every((m) => !m.retained)).toBe(true);
      expect(done).toBe(2);
    });

    it('takes commands on topics of others', async () => {
      const port = await kind.port();
      const room = await join(port);
      const rig = await agentAt(port, kind.protocol, { commandTopics: ['plc/pump-1/rpm'] });
      await rig.uplink.start();
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      await room.client.publishAsync('plc/pump-1/rpm', '1480', { qos: 1 });
      await room.client.publishAsync('plc/pump-1/rpm', 'x'.repeat(300), { qos: 1 });
      await room.client.publishAsync('plc/pump-1/rpm', '1470', { qos: 1 });
      await until(() => rig.commands.length === 2, 'the commands');
      expect(rig.commands).toEqual([
        ['plc/pump-1/rpm', '1480'],
        ['plc/pump-1/rpm', '1470'],
      ]);
    });

    it('counts on where another uplink left off', async () => {
      const port = await kind.port();
      const room = await join(port);
      const first = await agentAt(port, kind.protocol);
      await first.uplink.start();
      await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
      await room.client.publishAsync('forebay/north-weir/ask/shelve', '{"id":"ask-1"}', { qos: 1 });
      await until(() => first.uplink.status().asks.refused === 1, 'the refusal');
      await first.uplink.stop(500);
      const second = await agentAt(port, kind.protocol, { counters: first.uplink.counters });
      await second.uplink.start();
      await second.online();
      await until(() => second.uplink.status().connects === 2, 'the second connection');
      expect(second.uplink.status().asks).toEqual({ done: 0, refused: 1, ignored: 0 });
    });

    it('tells a command that the broker had kept from one that comes now', async () => {
      const port = await kind.port();
      const room = await join(port);
      await room.client.publishAsync('plc/pump-1/rpm', '1480', { qos: 1, retain: true });
      const rig = await agentAt(port, kind.protocol, { commandTopics: ['plc/pump-1/rpm'] });
      await rig.uplink.start();
      await until(() => rig.commands.length === 1, 'what was kept');
      await room.client.publishAsync('plc/pump-1/rpm', '1470', { qos: 1, retain: true });
      await until(() => rig.commands.length === 2, 'what is new');
      expect(rig.retainedCommands).toEqual(['1480']);
    });

    it('empties the retained topics of what has left the configuration, and no other', async () => {
      const port = await kind.port();
      const rig = await agentAt(port, kind.protocol);
      await rig.uplink.start();
      await rig.alarm(1);
      await rig.alarm(2);
      await rig.send('reading', rig.uplink.topics.reading('pump-1/old'));
      await rig.empty();
      const keep = rig.uplink.topics.alarm('pump-1', 'p1', 'zone');
      expect(await emptyForgotten(rig.store, rig.ids, (topic) => topic === keep)).toBe(2);
      rig.uplink.kick();
      await rig.empty();
      await until(() => rig.uplink.status().connected, 'connection');
      const room = await join(port);
      await until(() => room.heard.some((message) => message.topic === keep), 'what is retained');
      await until(() => room.heard.some((message) => message.topic === agentTopic), 'the agent');
      expect([...new Set(room.heard.map((message) => message.topic))].toSorted()).toEqual(
        [agentTopic, keep].toSorted(),
      );
      expect(await emptyForgotten(rig.store, rig.ids, (topic) => topic === keep)).toBe(0);
    });

    it('loses no alarm over cuts and stalls of the link', async () => {
      const port = await kind.port();
      const proxy = later(await FaultyLink.start(port), (made) => made.stop());
      const room = await join(port);
      const rig = await agentAt(proxy.port, kind.protocol, {});
      await rig.uplink.start();
      for (let k = 0; k < 120; k++) {
        await rig.alarm(k, 5);
        if (k % 30 === 10) proxy.cut();
        if (k === 55) {
          proxy.stall();
          setTimeout(() => proxy.flow(), 1500);
        }
        await sleep(4);
      }
      await room.hears(rig.alarms);
      await rig.empty();
      for (let subject = 0; subject < 5; subject++) {
        const numbers = room
          .ids(rig.uplink.topics.alarm('pump-1', `p${subject}`, 'zone'))
          .map((id) => Number(id.split('-')[1]));
        expect(numbers).toHaveLength(24);
        expect(numbers).toEqual(numbers.toSorted((a, b) => a - b));
      }
      expect(rig.uplink.status().connects).toBeGreaterThan(3);
    });
  });
}

describe.runIf(haveMosquitto)('a real broker that fails', () => {
  for (const protocol of [5, 4] as const) {
    it(`is killed and comes back without its memory: every retained alarm is there again (MQTT ${protocol})`, async () => {
      const broker = later(await Mosquitto.start(), (made) => made.stop());
      const room = await join(broker.port);
      const rig = await agentAt(broker.port, protocol);
      await rig.uplink.start();
      let k = 0;
      for (let round = 0; round < 3; round++) {
        for (let i = 0; i < 25; i++) await rig.alarm(k++);
        await sleep(20 * round);
        await broker.kill();
        for (let i = 0; i < 5; i++) await rig.alarm(k++);
        await broker.restart();
      }
      await room.hears(rig.alarms);
      await rig.empty();
      const latecomer = await join(broker.port);
      await latecomer.hears(rig.alarms);
      expect(rig.alarms).toHaveLength(90);
    });
  }

  it('stops answering: the connection is given up and the alarms arrive when it goes on', async () => {
    const broker = later(await Mosquitto.start(), (made) => made.stop());
    const room = await join(broker.port);
    const rig = await agentAt(broker.port, 5);
    await rig.uplink.start();
    await rig.alarm(0);
    await rig.empty();
    broker.pause();
    for (let k = 1; k < 30; k++) await rig.alarm(k);
    await until(() => !rig.uplink.status().connected, 'the connection to be given up');
    broker.resume();
    await room.hears(rig.alarms);
    expect(rig.said(/did not acknowledge/)).toBe(true);
  });

  it('is behind a link that is reset whenever an alarm is in flight: set aside, and sent once the link holds', async () => {
    const broker = later(await Mosquitto.start(), (made) => made.stop());
    const proxy = later(await FaultyLink.start(broker.port), (made) => made.stop());
    const room = await join(broker.port);
    const rig = await agentAt(proxy.port, 5);
    await rig.uplink.start();
    await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
    // What goes out now is acknowledged long after the reset.
    proxy.delayMs = 150;
    await rig.alarm(1);
    const aside = async () => (await rig.store.counters()).setAside.rows;
    while ((await aside()) === 0) {
      if (rig.uplink.status().inFlight > 0) proxy.cut();
      await sleep(20);
    }
    proxy.delayMs = 0;
    await room.hears(rig.alarms);
    expect(await aside()).toBe(0);
  });

  it('does not send the retained messages again when the broker kept them', async () => {
    const broker = later(await Mosquitto.start(), (made) => made.stop());
    const proxy = later(await FaultyLink.start(broker.port), (made) => made.stop());
    const room = await join(broker.port);
    const rig = await agentAt(proxy.port, 5);
    await rig.uplink.start();
    for (let k = 0; k < 5; k++) await rig.alarm(k);
    await rig.empty();
    proxy.cut();
    await until(() => rig.uplink.status().connects === 2, 'the second connection');
    await until(() => room.last(agentTopic)?.state === 'online', 'the agent to be online');
    await rig.send('state', rig.uplink.topics.state('pump-1'));
    await rig.empty();
    expect(room.heard.filter((message) => message.topic.includes('/alarm/'))).toHaveLength(5);
  });

  it('refuses what is too large: it is set aside before it is sent, and the rest goes on (MQTT 5 says the limit)', async () => {
    const broker = later(await Mosquitto.start(['allow_anonymous true', 'max_packet_size 2000']), (made) =>
      made.stop(),
    );
    const room = await join(broker.port);
    const rig = await agentAt(broker.port, 5);
    const large = await rig.send('reading', rig.uplink.topics.reading('pump-1/large'), {
      text: 'x'.repeat(3000),
    });
    const wild = await rig.send('reading', rig.uplink.topics.reading('pump-1/+'));
    await rig.uplink.start();
    await rig.alarm(1);
    await room.hears(rig.alarms);
    await rig.empty();
    const { setAside } = await rig.store.counters();
    expect(setAside.rows).toBe(2);
    expect(setAside.latest?.reason).toBe('the topic holds a wildcard or a NUL');
    expect(rig.said(/3\d{3} bytes are more than the 2000/)).toBe(true);
    expect(rig.uplink.status().connects).toBe(1);
    expect(room.ids()).not.toContain(large);
    expect(room.ids()).not.toContain(wild);
  });

  it('hangs up over one message, MQTT 3.1.1 tells no limit: that one is found and set aside, no alarm is', async () => {
    const broker = later(await Mosquitto.start(['allow_anonymous true', 'max_packet_size 2000']), (made) =>
      made.stop(),
    );
    const room = await join(broker.port);
    const rig = await agentAt(broker.port, 4, { maxPacketBytes: 1e6 });
    await rig.send('reading', rig.uplink.topics.reading('pump-1/large'), { text: 'x'.repeat(3000) });
    await rig.uplink.start();
    for (let k = 0; k < 10; k++) await rig.alarm(k);
    await room.hears(rig.alarms);
    await rig.empty();
    const { setAside } = await rig.store.counters();
    expect(setAside).toMatchObject({ rows: 1, latest: { reason: 'the broker hung up 8 times over it' } });
  });

  it('denies by its access rules (MQTT 5): set aside, visible, and alarms tried again at the next connection', async () => {
    const acl = [
      'topic readwrite forebay/north-weir/agent',
      'topic readwrite forebay/north-weir/pump-2/#',
      'topic read #',
    ];
    const broker = later(
      await Mosquitto.start(['allow_anonymous true', 'acl_file FOLDER/acl'], { acl: `${acl.join('\n')}\n` }),
      (made) => made.stop(),
    );
    const proxy = later(await FaultyLink.start(broker.port), (made) => made.stop());
    const rig = await agentAt(proxy.port, 5);
    await rig.uplink.start();
    await rig.alarm(1);
    const allowed = await rig.send('alarm', rig.uplink.topics.alarm('pump-2', 'p', 'zone'));
    const room = await join(broker.port);
    await room.hears([allowed]);
    await rig.empty();
    const { setAside } = await rig.store.counters();
    expect(setAside.rows).toBe(1);
    // 135: not authorized (MQTT 5, 3.4.2.1)
    expect(setAside.latest?.reason).toMatch(/^refused by the broker: .*\(135\)$/);
    const attempts = () => rig.lines.filter((line) => line.message === 'a message is set aside').length;
    expect(attempts()).toBe(1);
    proxy.cut();
    await until(() => attempts() === 2, 'a second try');
    expect((await rig.store.counters()).setAside.rows).toBe(1);
  });

  it('has a backlog at a slow link: a fresh alarm overtakes all that is not on the wire yet', async () => {
    const broker = later(await Mosquitto.start(), (made) => made.stop());
    const proxy = later(await FaultyLink.start(broker.port), (made) => made.stop());
    proxy.bytesPerS = 40_000;
    const room = await join(broker.port);
    const rig = await agentAt(proxy.port, 5);
    const readings: string[] = [];
    for (let k = 0; k < 120; k++) {
      const topic = rig.uplink.topics.reading(`pump-1/p${k % 40}`);
      readings.push(await rig.send('reading', topic, { text: 'x'.repeat(900) }));
    }
    await rig.uplink.start();
    await room.hears(readings.slice(0, 10));
    const before = room.ids().length;
    await rig.alarm(1);
    await room.hears([...rig.alarms, ...readings]);
    // At most sixteen are on the wire; as many again may have come in while the alarm was written.
    const place = room.ids().indexOf(rig.alarms[0]!);
    expect(place).toBeLessThanOrEqual(before + 32);
    expect(place).toBeLessThan(80);
    await rig.empty();
  });

  it('keeps the byte budget for all but alarms, and what is left is told', async () => {
    const broker = later(await Mosquitto.start(), (made) => made.stop());
    const room = await join(broker.port);
    const rig = await Rig.make(remoteBroker(broker.port, { protocol: 5, bytesPerDay: 12_000 }));
    later(rig, (made) => made.uplink.stop(400));
    await rig.uplink.start();
    await rig.online();
    for (let k = 0; k < 30; k++) {
      await rig.send('reading', rig.uplink.topics.reading(`pump-1/p${k}`), { text: 'x'.repeat(900) });
    }
    await until(() => rig.uplink.status().leftTodayBytes < 1500, 'the budget to be spent');
    for (let k = 0; k < 20; k++) await rig.alarm(k);
    await room.hears(rig.alarms);
    const counts = async () => (await rig.store.counters()).outbox;
    await until(async () => (await counts()).byClass.alarm === 0, 'the alarms to be acknowledged');
    const outbox = await counts();
    expect(outbox.byClass.reading).toBeGreaterThan(15);
    await until(async () => (await rig.store.budget(0)).length > 0, 'the books to be kept');
    const books = Object.fromEntries((await rig.store.budget(0)).map((line) => [line.class, line.sentBytes]));
    expect(books.reading).toBeGreaterThan(7000);
    expect(books.link).toBeGreaterThan(0);
  });
});
