/**
 * A node whose clock is 3 % off, live: its samples come over a pseudo-terminal at their true pace, the agent measures the
 * rate against its own clock, and names the lines where they are.
 */
import mqtt from 'mqtt';
import { afterEach, describe, expect, it } from 'vitest';
import type { Reading } from '../../src/measure/reading.ts';
import { AgentProcess } from '../support/agent.ts';
import { freePort } from '../support/mosquitto.ts';
import { sleep } from '../support/proxy.ts';
import { pumpCounts } from '../support/pump-signal.ts';
import { PacedSender, type SentNode } from '../support/sender.ts';
import { haveSocat, SocatCable } from '../support/socat.ts';

const nominalHz = 12_800;
const trueRateHz = 0.97 * nominalHz;
const gPerCount = 2 ** -12;
const shaftHz = 25;
/** 9 elements of 7.938 mm on 39.04 mm: BPFO = 9/2·(1 − 7.938/39.04) × shaft (kinematics). */
const bpfoHz = shaftHz * 4.5 * (1 - 7.938 / 39.04);
const patienceS = 50;

const node: SentNode = {
  node: 7,
  rateHz: nominalHz,
  format: 'i16',
  channels: [{ name: 'h', unit: 'g', scale: gPerCount }],
  serialNumber: 'A1',
  firmware: '0.9',
};

const stationText = (port: number) => `
site: {id: test-weir, name: Test weir, mains_hz: 50}
broker: {embedded: {port: ${port}}}
storage: {directory: FOLDER/state}
publish: {change_pct: 1, min_interval_s: 1, at_least_s: 2}
measure: {every_s: 3}
links:
  - id: node-1
    serial: {path: FOLDER/tty, baud: 3000000}
    format: frames
    expect: {node: 7, sample_rate_hz: ${nominalHz}, channels: [h]}
machines:
  - id: pump-1
    name: Duty pump 1
    severity: {table: iso-10816-7, category: I, rated_kw: 45}
    shaft: {rpm: 1500, tolerance_pct: 2}
    start_delay_s: 0
    bearings: [{id: de, elements: 9, element_mm: 7.938, pitch_mm: 39.04, contact_deg: 0}]
    points: [{id: h, link: node-1, channel: h, direction: horizontal, part: motor, end: de, bearing: de}]
`;

describe.runIf(haveSocat)('a node that is 3 % slow', () => {
  const undo: (() => unknown)[] = [];
  afterEach(async () => {
    for (const step of undo.splice(0).reverse()) await step();
  });

  it('has its rate measured, and speed, velocity and bearing line named right by it', async () => {
    const counts = pumpCounts({
      rateHz: trueRateHz,
      seconds: patienceS + 5,
      gPerCount,
      tone: { hz: shaftHz, velocityMmS: 10 },
      knocks: { hz: bpfoHz, peakG: 1.5, ringHz: 2900, decayS: 0.0012 },
      noiseG: 0.02,
      seed: 4,
    });
    const port = await freePort();
    const agent = new AgentProcess(stationText(port));
    undo.push(() => agent.dispose());
    const cable = await SocatCable.lay(`${agent.folder}/tty`);
    undo.push(() => cable.cut());
    await agent.start();
    const client = await mqtt.connectAsync(`mqtt://127.0.0.1:${port}`);
    undo.push(() => client.endAsync(true));
    const heard: Reading[] = [];
    client.on('message', (_, payload) => heard.push(JSON.parse(String(payload)) as Reading));
    await client.subscribeAsync('forebay/test-weir/pump-1/h/reading', { qos: 1 });

    const sender = new PacedSender(node, (bytes) => cable.write(bytes), {
      trueRateHz,
      counts: (first, n) => counts.subarray(first, first + n),
    });
    undo.push(() => sender.stop());
    sender.start();
    const measured = () => heard.filter(({ rate }) => rate.source === 'measured');
    for (let waited = 0; waited < patienceS && measured().length < 2; waited += 0.1) await sleep(100);

    expect(measured().length).toBeGreaterThanOrEqual(2);
    for (const { rate, shaft, orders, envelope, why } of measured()) {
      expect(why).toEqual([]);
      // It is used from an uncertainty of 200 ppm on, which is twice the standard error.
      expect(Math.abs(rate.hz / trueRateHz - 1)).toBeLessThan(4e-4);
      expect(Math.abs(shaft.hz! / shaftHz - 1)).toBeLessThan(1e-3);
      expect(Math.abs(orders['1'].mm_s! / 10 - 1)).toBeLessThan(0.005);
      expect(Math.abs(envelope!.bpfo!.expected_hz / bpfoHz - 1)).toBeLessThan(1e-3);
      expect(Math.abs(envelope!.bpfo!.hz! / bpfoHz - 1)).toBeLessThan(0.005);
      expect(envelope!.defect).toBe('outer');
    }
    // Until then it is the claim, which puts the machine outside of what the settings allow: no speed, not a wrong one.
    for (const { shaft } of heard.filter(({ rate }) => rate.source === 'nominal'))
      expect(shaft.hz).toBeNull();
  }, 90_000);
});
