import { spawn } from 'node:child_process';
import { once } from 'node:events';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, describe, expect, it } from 'vitest';
import { channelVerdict } from '../../src/cli/channel-verdict.ts';
import { openPty } from '../../src/simulate/pty.ts';
import { AgentProcess, command } from '../support/agent.ts';
import { freePort } from '../support/mosquitto.ts';
import { PacedSender } from '../support/sender.ts';

const undo: (() => void | Promise<void>)[] = [];
afterEach(async () => {
  for (const step of undo.splice(0).reverse()) await step();
});

const stationText = (path: string, port: number) => `
site: {id: test-weir, name: Test weir, mains_hz: 50}
broker: {embedded: {port: ${port}}}
storage: {directory: state}
links:
  - {id: node-1, serial: {path: ${path}, baud: 3000000}, format: frames}
machines:
  - id: pump-1
    name: Duty pump 1
    points: [{id: h, link: node-1, channel: h}]
`;

async function run(...args: string[]): Promise<{ status: number | null; out: string; err: string }> {
  const child = spawn(process.execPath, [command, ...args]);
  let out = '';
  let err = '';
  child.stdout.on('data', (chunk) => {
    out += String(chunk);
  });
  child.stderr.on('data', (chunk) => {
    err += String(chunk);
  });
  const [status] = (await once(child, 'close')) as [number | null];
  return { status, out, err };
}

describe('forebay listen', () => {
  it('says of each channel what it hears and whether that can be right', async () => {
    const pty = await openPty();
    undo.push(() => pty.close());
    const folder = mkdtempSync(join(tmpdir(), 'forebay-listen-'));
    undo.push(() => rmSync(folder, { recursive: true, force: true }));
    const file = join(folder, 'station.yaml');
    writeFileSync(file, stationText(pty.path, await freePort()));
    const channel = (name: string) => ({ name, unit: 'g' as const, scale: 2 ** -12 });
    const node = {
      node: 7,
      rateHz: 4000,
      format: 'i16' as const,
      channels: [channel('h'), channel('dead'), channel('clipped')],
      serialNumber: 'A1',
      firmware: '1',
    };
    const counts = (first: number, n: number) =>
      Array.from({ length: n }, (_, i) => {
        const wave = Math.sin((2 * Math.PI * 50 * (first + i)) / 4000);
        return [Math.round(4096 * wave), 12, Math.max(-32768, Math.min(32767, Math.round(60_000 * wave)))];
      }).flat();
    const sender = new PacedSender(node, (bytes) => pty.write(bytes), { counts });
    sender.start();
    undo.push(() => sender.stop());
    const { status, out } = await run('listen', '-c', file, '--seconds', '5');
    expect(status).toBe(0);
    // A sine of 1 g has an RMS of 0.707 g.
    expect(out).toMatch(/h: RMS 0\.707 g, peak 1\.00 g, 0 over-range: ok/);
    expect(out).toMatch(/dead: RMS 0\.00 g, .*flat/);
    expect(out).toMatch(/clipped: RMS .*, [1-9]\d* over-range: clipped/);
    expect(out).toMatch(/node-1: .*claims 4000 Hz/);
  });

  it('refuses while the agent holds the station', async () => {
    const pty = await openPty();
    undo.push(() => pty.close());
    const agent = new AgentProcess(stationText(pty.path, await freePort()));
    undo.push(() => agent.dispose());
    await agent.start();
    const { status, err, out } = await run('listen', '-c', agent.stationFile, '--seconds', '1');
    expect(status).toBe(1);
    expect(err).toMatch(/another agent is running.*\n.*store\.locked/);
    expect(out).toBe('');
  });
});

describe('channelVerdict', () => {
  const wave = (amplitude: number, mean: number) =>
    Int32Array.from({ length: 4000 }, (_, i) => Math.round(amplitude * Math.sin(i / 7.3) + mean));
  const channel = { name: 'x', unit: 'g' as const, unitsPerCount: 0.001, countRange: null };

  it('suspects the unit where gravity reads as the other unit would', () => {
    expect(channelVerdict(wave(100, 1000), channel, null).verdict).toBe('ok');
    expect(channelVerdict(wave(100, 9807), channel, null).verdict).toMatch(/wrong unit/);
    expect(channelVerdict(wave(100, 1000), { ...channel, unit: 'm/s2' }, null).verdict).toMatch(/wrong unit/);
    expect(channelVerdict(wave(100, 9807), { ...channel, unit: 'm/s2' }, null).verdict).toBe('ok');
  });

  it('calls what is beyond the range of the sensor clipped, and a tachometer without pulses silent', () => {
    expect(channelVerdict(wave(5000, 0), channel, 4).verdict).toMatch(/clipped/);
    expect(channelVerdict(wave(5000, 0), channel, 8).verdict).toBe('ok');
    const logic = { ...channel, unit: 'logic' as const };
    expect(channelVerdict(new Int32Array(4000), logic, null).verdict).toMatch(/silent/);
    const turns = Int32Array.from({ length: 4000 }, (_, i) => (i % 400 < 5 ? 1 : 0));
    expect(channelVerdict(turns, logic, null).verdict).toMatch(/^ok: 9 pulses/);
  });
});
