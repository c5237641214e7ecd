import { spawnSync } from 'node:child_process';
import { once } from 'node:events';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { type AddressInfo, createServer } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { command } from '../support/agent.ts';

const folder = mkdtempSync(join(tmpdir(), 'forebay-main-'));
afterAll(() => rmSync(folder, { recursive: true, force: true }));

function forebay(...args: string[]) {
  return spawnSync(process.execPath, [command, ...args], { encoding: 'utf8' });
}

describe('the command line', () => {
  it('shows its commands and that it only advises', () => {
    const { status, stdout } = forebay('--help');
    expect(status).toBe(0);
    for (const name of [
      'run',
      'check',
      'listen',
      'learn',
      'replay',
      'journal',
      'pull',
      'export',
      'report',
      'demo',
    ])
      expect(stdout).toContain(`  ${name} `);
    expect(stdout).toMatch(/not a machine protection system/);
  });

  it.each([
    [[], 'nothing at all'],
    [['fly'], 'an unknown command'],
    [['check'], 'a missing option'],
    [['run', '-c', 'x.yaml', '--fast'], 'an unknown option'],
    [['listen', '-c', 'x.yaml', '--seconds', 'soon'], 'no number where one is wanted'],
  ])('ends with status 2 on %j, %s', (args) => {
    const { status, stdout, stderr } = forebay(...args);
    expect(status).toBe(2);
    expect(stdout).toBe('');
    expect(stderr.length).toBeGreaterThan(10);
  });

  it.each(['run', 'check', 'journal'])(
    '%s ends with status 2 on a wrong station file and lists the places',
    (name) => {
      const file = join(folder, 'wrong.yaml');
      writeFileSync(file, 'site: {id: UPPER, name: X, mains_hz: 55}\nbroke: {}\n');
      const { status, stdout, stderr } = forebay(name, '-c', file);
      expect(status).toBe(2);
      const said = stdout + stderr;
      expect(said).toMatch(/wrong\.yaml:1:\d+ site\.id: /);
      expect(said).toMatch(/wrong\.yaml:1:\d+ site\.mains_hz: /);
      expect(said).toMatch(/wrong\.yaml:2:\d+ broke: /);
    },
  );

  it('names the file that it cannot read, and what to do', () => {
    const { status, stderr } = forebay('run', '-c', join(folder, 'absent.yaml'));
    expect(status).toBe(2);
    expect(stderr).toMatch(/absent\.yaml.*\n.*\(file\.unreadable\)/);
  });

  it('run ends with status 1 and stops what it began when the port of its broker is taken', async () => {
    const holder = createServer().listen(0, '127.0.0.1');
    await once(holder, 'listening');
    const { port } = holder.address() as AddressInfo;
    const file = join(folder, 'busy.yaml');
    writeFileSync(
      file,
      `site: {id: busy}
storage: {directory: ${join(folder, 'busy')}}
broker: {embedded: {port: ${port}}}
links: [{id: n, serial: {path: ${join(folder, 'absent')}}}]
machines: [{id: p, shaft: {rpm: 1470}, points: [{id: h, link: n, channel: h}]}]
`,
    );
    const args = [command, 'run', '-c', file];
    const { status, stderr } = spawnSync(process.execPath, args, {
      encoding: 'utf8',
      timeout: 20_000,
      killSignal: 'SIGKILL',
    });
    holder.close();
    expect(status, stderr).toBe(1);
    expect(stderr).toContain(`port ${port} of 127.0.0.1`);
    expect(stderr).toContain('"msg":"stopped"');
  }, 30_000);
});
