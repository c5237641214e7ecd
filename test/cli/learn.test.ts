// What the command says where it cannot learn; that it learns is tested with a running agent, in test/station.
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import mqtt from 'mqtt';
import { afterAll, expect, it } from 'vitest';
import { learnCommand } from '../../src/cli/learn.ts';
import { startAedes } from '../support/broker.ts';
import { freePort } from '../support/mosquitto.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-learn-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

function stationFile(port: number, asks: string): string {
  const path = join(folder, `station-${port}.yaml`);
  writeFileSync(
    path,
    `
site: {id: weir, mains_hz: 50}
broker: {url: "mqtt://127.0.0.1:${port}"}
links: [{id: node-1, serial: {path: /dev/ttyACM0}}]
machines: [{id: pump-1, points: [{id: h, link: node-1, channel: h}]}]
asks: [${asks}]
`,
  );
  return path;
}

async function learn(config: string): Promise<{ status: number; said: string }> {
  let said = '';
  const write = (text: string) => {
    said += text;
  };
  const status = await learnCommand({ config, hours: 1, accept: true, out: { write }, err: { write } });
  return { status, said };
}

it('says that the station does not answer this ask, or that there is no broker', async () => {
  const port = await freePort();
  await expect(learn(stationFile(port, 'readings'))).rejects.toMatchObject({
    code: 'command.usage',
    message: expect.stringMatching(/does not answer the ask baseline; add it to asks/),
  });
  await expect(learn(stationFile(port, 'baseline'))).rejects.toMatchObject({
    code: 'uplink.unreachable',
    message: expect.stringContaining(`127.0.0.1:${port}`),
  });
});

it('prints what the agent refuses, point by point, and ends with 1 where nothing was learned', async () => {
  const broker = await startAedes();
  const agent = await mqtt.connectAsync(`mqtt://127.0.0.1:${broker.port}`);
  const asked: string[] = [];
  agent.on('message', (topic, payload) => {
    const { id, machine, action, hours } = JSON.parse(String(payload));
    asked.push(`${topic.split('/').at(-1)} ${machine} ${action} ${hours ?? ''}`.trim());
    const learning =
      action === 'start' ? { since: '2026-03-02T10:00:00.000Z', hours, hours_left: hours } : null;
    const h = {
      readings: null,
      proposed: null,
      refused: '7 good readings while running, 30 are needed',
      accepted: null,
    };
    agent.publish(
      `forebay/weir/answer/${id}`,
      JSON.stringify({ id: 'abcd-1', ask: id, ok: true, machine, learning, points: { h } }),
    );
  });
  await agent.subscribeAsync('forebay/weir/ask/+');
  const { status, said } = await learn(stationFile(broker.port, 'baseline'));
  expect(status).toBe(1);
  expect(said).toBe(
    'pump-1: learning for 1 h of the running agent\npump-1/h: refused: 7 good readings while running, 30 are needed\n',
  );
  expect(asked).toEqual(['baseline pump-1 show', 'baseline pump-1 start 1', 'baseline pump-1 show']);
  await agent.endAsync(true);
  await broker.stop();
});
