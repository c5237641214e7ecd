// The example access rules and configuration that ship, at a real mosquitto.
import { spawnSync } from 'node:child_process';
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import mqtt, { type MqttClient } from 'mqtt';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { ControlRoom, Rig, remoteBroker, until } from '../support/broker-rig.ts';
import { haveMosquitto, Mosquitto } from '../support/mosquitto.ts';

const shipped = (name: string) => readFileSync(new URL(`../../config/${name}`, import.meta.url), 'utf8');
const users = ['north-weir', 'south-weir', 'north-weir-plc', 'control-room', 'viewer'];

describe.runIf(haveMosquitto)('the example access rules', () => {
  let broker: Mosquitto;
  const clients: MqttClient[] = [];
  const rigs: Rig[] = [];

  /** The example as it ships, but for the listener, TLS (test/uplink/tls.test.ts) and the paths. */
  const lines = shipped('mosquitto.example.conf')
    .split('\n')
    .filter((line) => !/^(listener|cafile|certfile|keyfile)\b/.test(line))
    .map((line) => line.replace('/etc/mosquitto/', 'FOLDER/').replace('/var/lib/mosquitto/', 'FOLDER/'));

  beforeAll(async () => {
    broker = await Mosquitto.start(lines, {
      acl: shipped('mosquitto-acl.example'),
      passwords: `${users.map((user) => `${user}:pw-${user}`).join('\n')}\n`,
    });
    await broker.kill();
    expect(spawnSync('mosquitto_passwd', ['-U', join(broker.folder, 'passwords')]).status).toBe(0);
    await broker.restart();
  });
  afterAll(async () => {
    for (const rig of rigs) await rig.uplink.stop(300);
    for (const client of clients) await client.endAsync(true);
    await broker.stop();
  });

  /** MQTT 5: a denied publish is told. */
  async function user(name: string): Promise<MqttClient> {
    const client = await mqtt.connectAsync(`mqtt://127.0.0.1:${broker.port}`, {
      username: name,
      password: `pw-${name}`,
      protocolVersion: 5,
    });
    clients.push(client);
    return client;
  }

  /** 0, or the reason of the PUBACK; 135: not authorized (MQTT 5, 3.4.2.1). */
  async function publishing(client: MqttClient, topic: string): Promise<number> {
    return await client.publishAsync(topic, '{"id":"test-1"}', { qos: 1 }).then(
      () => 0,
      (error: { code: number }) => error.code,
    );
  }

  async function agent(site: string): Promise<Rig> {
    const passwordFile = join(broker.folder, `secret-${site}`);
    writeFileSync(passwordFile, `pw-${site}\n`, { mode: 0o600 });
    const rig = await Rig.make(
      remoteBroker(broker.port, { clientId: site, username: site, passwordFile, protocol: 5 }),
      { site, commandTopics: [`plc/${site}/rpm`] },
    );
    rigs.push(rig);
    await rig.uplink.start();
    return rig;
  }

  it('give an agent all that it needs: its topics, its asks, its commands, its own last word', async () => {
    const rig = await agent('north-weir');
    const room = await ControlRoom.join(broker.port, {
      username: 'control-room',
      password: 'pw-control-room',
    });
    clients.push(room.client);
    await rig.alarm(1);
    await room.hears(rig.alarms);
    rig.uplink.handle('readings', () => ({ points: {} }));
    await until(() => room.last('forebay/north-weir/agent')?.state === 'online', 'the agent');
    await room.client.publishAsync('forebay/north-weir/ask/readings', '{"id":"ask-1"}', { qos: 1 });
    await until(() => room.last('forebay/north-weir/answer/ask-1')?.ok === true, 'the answer');
    const plc = await user('north-weir-plc');
    expect(await publishing(plc, 'plc/north-weir/rpm')).toBe(0);
    await until(() => rig.commands.length === 1, 'the command');
    expect(rig.said(/denies/)).toBe(false);
    expect((await rig.store.counters()).setAside.rows).toBe(0);
  });

  it('let an agent write no topic of another station, and hear none of its asks', async () => {
    const north = await user('north-weir');
    for (const topic of ['agent', 'pump-1/alarm/p.zone', 'health', 'ask/readings', 'answer/x']) {
      expect(await publishing(north, `forebay/south-weir/${topic}`)).toBe(135);
    }
    const overheard: string[] = [];
    north.on('message', (topic) => overheard.push(topic));
    await north.subscribeAsync(['forebay/#', '#'], { qos: 1 }).catch(() => undefined);
    const room = await user('control-room');
    expect(await publishing(room, 'forebay/south-weir/ask/acknowledge')).toBe(0);
    expect(await publishing(room, 'forebay/north-weir/ask/readings')).toBe(0);
    await until(() => overheard.includes('forebay/north-weir/ask/readings'), 'its own ask');
    expect(overheard.filter((topic) => !topic.startsWith('forebay/north-weir/'))).toEqual([]);
  });

  it('let a viewer read and neither ask nor speak', async () => {
    const viewer = await user('viewer');
    const seen: string[] = [];
    viewer.on('message', (topic) => seen.push(topic));
    await viewer.subscribeAsync('forebay/#', { qos: 1 });
    await until(() => seen.includes('forebay/north-weir/agent'), 'what is retained');
    for (const topic of ['ask/readings', 'ask/acknowledge', 'agent', 'pump-1/state']) {
      expect(await publishing(viewer, `forebay/north-weir/${topic}`)).toBe(135);
    }
  });

  it('let the control room ask and nothing else, the controller tell its speed and nothing else', async () => {
    const room = await user('control-room');
    expect(await publishing(room, 'forebay/north-weir/pump-1/state')).toBe(135);
    expect(await publishing(room, 'plc/north-weir/rpm')).toBe(135);
    const plc = await user('north-weir-plc');
    expect(await publishing(plc, 'forebay/north-weir/ask/readings')).toBe(135);
    expect(await publishing(plc, 'plc/south-weir/rpm')).toBe(135);
  });

  it('let in nobody without a password', async () => {
    const attempt = mqtt.connectAsync(
      `mqtt://127.0.0.1:${broker.port}`,
      { protocolVersion: 5, reconnectPeriod: 0 },
      false,
    );
    // CONNACK 135: not authorized (MQTT 5, 3.2.2.2)
    await expect(attempt).rejects.toMatchObject({ code: 135 });
  });
});
