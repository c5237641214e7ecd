/** `forebay pull` against a station of the test's own, at a broker of MQTT 3.1.1, with cuts of the puller's line. */
import { createHash } from 'node:crypto';
import { existsSync, mkdtempSync, readFileSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import mqtt, { type MqttClient } from 'mqtt';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { pullCommand } from '../../src/cli/pull.ts';
import { startAedes, type TestBroker } from '../support/broker.ts';
import { FaultyLink, sleep } from '../support/proxy.ts';

const partBytes = 1000;
const file = Buffer.from(Array.from({ length: 99_500 }, (_, i) => (i * 7) % 253));
const sha256 = createHash('sha256').update(file).digest('hex');
const partsOfAll = 100;

type Ask = Record<string, unknown> & { id: string; parts?: number[]; cancel?: string };

let broker: TestBroker;
let line: FaultyLink;
let station: MqttClient;
let folder = '';
let out = '';
let said = '';
/** What was asked, in order. */
let asks: Ask[] = [];
/** How the station of this test answers a fetch. */
let serve: (ask: Ask) => Promise<void>;

const send = (topic: string, body: Buffer | Record<string, unknown>) =>
  station.publishAsync(`forebay/weir/${topic}`, Buffer.isBuffer(body) ? body : JSON.stringify(body), {
    qos: 1,
  });
const about = { snapshot: 's', bytes: file.length, sha256, part_bytes: partBytes, parts: partsOfAll };
const part = (n: number) => file.subarray(n * partBytes, (n + 1) * partBytes);
const wanted = (ask: Ask) => ask.parts ?? Array.from({ length: partsOfAll }, (_, n) => n);

async function answer(ask: Ask, body: Record<string, unknown> = {}): Promise<void> {
  await send(`answer/${ask.id}`, {
    id: 'k-1',
    ask: ask.id,
    ok: true,
    ...about,
    sending: wanted(ask).length,
    ...body,
  });
}

function pull(changes: Partial<Parameters<typeof pullCommand>[0]> = {}): Promise<number> {
  const files = { username: null, passwordFile: null, caFile: null, certFile: null, keyFile: null };
  const err = {
    write: (text: string) => {
      said += text;
    },
  };
  const cut = { point: null, seconds: null, fromS: null, channels: null };
  const base = { broker: `mqtt://127.0.0.1:${line.port}`, site: 'weir', protocol: null, force: false };
  return pullCommand({ ...files, ...cut, ...base, snapshot: 's', file: out, err, ...changes });
}

beforeEach(async () => {
  [asks, said] = [[], ''];
  folder = mkdtempSync(join(tmpdir(), 'forebay-pull-'));
  out = join(folder, 'out.flac');
  broker = await startAedes();
  line = await FaultyLink.start(broker.port);
  station = await mqtt.connectAsync(`mqtt://127.0.0.1:${broker.port}`, { protocolVersion: 4 });
  station.on('message', (topic, payload) => {
    const ask = { ...(JSON.parse(String(payload)) as Ask), verb: topic.split('/').at(-1) };
    asks.push(ask);
    void serve(ask);
  });
  await station.subscribeAsync('forebay/weir/ask/+', { qos: 1 });
  await station.publishAsync('forebay/weir/agent', JSON.stringify({ state: 'online', t: 'now' }), {
    qos: 1,
    retain: true,
  });
});
afterEach(async () => {
  await station.endAsync(true);
  await line.stop();
  await broker.stop();
  rmSync(folder, { recursive: true, force: true });
});

describe('forebay pull', () => {
  it('speaks 3.1.1 where the broker does not speak 5, takes parts before their answer, and asks for what was not sent', async () => {
    serve = async (ask) => {
      const some = wanted(ask).slice(0, 64);
      for (const n of some.slice(0, 3)) await send(`answer/${ask.id}/${n}`, part(n));
      await answer(ask, { sending: some.length });
      for (const n of some.slice(3)) await send(`answer/${ask.id}/${n}`, part(n));
    };
    expect(await pull()).toBe(0);
    expect(readFileSync(out).equals(file)).toBe(true);
    expect(asks.map(({ parts }) => parts?.length)).toEqual([undefined, 36]);
    expect(said).toContain('[########################] 100 %  99.5 kB of 99.5 kB');
  });

  it('comes back after its own line was cut, calls off the old fetch and asks for the rest alone', async () => {
    const sent: number[] = [];
    serve = async (ask) => {
      await answer(ask);
      for (const n of wanted(ask)) {
        if (asks.at(-1) !== ask) return;
        await send(`answer/${ask.id}/${n}`, part(n));
        sent.push(n);
        if (sent.length === 40) {
          await sleep(100);
          line.cut();
          return;
        }
      }
    };
    expect(await pull()).toBe(0);
    expect(readFileSync(out).equals(file)).toBe(true);
    expect(said).toContain('the connection to the broker is lost');
    const [first, second] = asks;
    expect(second?.cancel).toBe(first?.id);
    expect(second?.parts?.[0]).toBe(40);
    expect(sent).toHaveLength(partsOfAll);
  }, 20_000);

  it('keeps what came where the budget ends, and goes on with it another day', async () => {
    const until = 'the daily budget for waveforms is spent until 2026-03-03T00:00:00.000Z';
    serve = async (ask) => {
      await answer(ask);
      for (let n = 0; n < 30; n++) await send(`answer/${ask.id}/${n}`, part(n));
      await send(`answer/${ask.id}`, { id: 'k-2', ask: ask.id, ok: false, error: until });
    };
    await expect(pull()).rejects.toMatchObject({ code: 'pull.budget', message: until });
    expect(existsSync(out)).toBe(false);
    serve = async (ask) => {
      await answer(ask);
      for (const n of wanted(ask)) await send(`answer/${ask.id}/${n}`, part(n));
    };
    asks = [];
    expect(await pull()).toBe(0);
    expect(asks.map(({ parts }) => parts?.length)).toEqual([0, 70]);
    expect(readFileSync(out).equals(file)).toBe(true);
  });

  it('begins anew where the station has another file under that name', async () => {
    const stop = new AbortController();
    serve = async (ask) => {
      await answer(ask, { sha256: '0'.repeat(64) });
      if (ask.cancel) return;
      for (let n = 0; n < 5; n++) await send(`answer/${ask.id}/${n}`, Buffer.alloc(partBytes, 1));
      setTimeout(() => stop.abort(), 200);
    };
    expect(await pull({ signal: stop.signal })).toBe(1);
    serve = async (ask) => {
      await answer(ask);
      for (const n of wanted(ask)) await send(`answer/${ask.id}/${n}`, part(n));
    };
    expect(await pull()).toBe(0);
    expect(readFileSync(out).equals(file)).toBe(true);
  });

  it('keeps nothing of a file whose hash is wrong', async () => {
    serve = async (ask) => {
      await answer(ask);
      for (const n of wanted(ask)) await send(`answer/${ask.id}/${n}`, Buffer.alloc(part(n).length, 1));
    };
    await expect(pull()).rejects.toMatchObject({ code: 'pull.damaged' });
    expect([out, `${out}.part`, `${out}.part.json`].filter((path) => existsSync(path))).toEqual([]);
  });

  it('says what the station refuses, where it is offline, and what the command line lacks', async () => {
    serve = async (ask) => {
      await send(`answer/${ask.id}`, {
        id: 'k-1',
        ask: ask.id,
        ok: false,
        error: 'snapshot is not enabled at this station',
      });
    };
    await expect(pull({ snapshot: null, point: 'pump-1/h' })).rejects.toMatchObject({
      code: 'pull.refused',
      message: 'refused by the station: snapshot is not enabled at this station',
    });
    serve = async (ask) => answer(ask, { parts: 3 });
    await expect(pull()).rejects.toMatchObject({ code: 'pull.refused' });
    await expect(pull({ snapshot: null })).rejects.toMatchObject({ code: 'command.usage' });
    const offline = JSON.stringify({ state: 'offline', t: '2026-03-02T10:15:30.000Z' });
    await station.publishAsync('forebay/weir/agent', offline, { qos: 1, retain: true });
    await expect(pull()).rejects.toMatchObject({
      code: 'pull.offline',
      message: 'station weir is offline; its last word is of 2026-03-02T10:15:30.000Z',
    });
  });
});
