/** What systemd is told, by the real `systemd-notify` into a socket of the test's own, and the unit that ships. */
import { type ChildProcess, spawn, spawnSync } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { afterEach, describe, expect, it } from 'vitest';
import type { LinkHealth } from '../../src/link/link-health.ts';
import { Log } from '../../src/station/log.ts';
import { STUCK_AFTER_S } from '../../src/station/progress.ts';
import { ServiceManager } from '../../src/station/service-manager.ts';
import { Supervision } from '../../src/station/supervision.ts';
import { AgentProcess } from '../support/agent.ts';
import { until } from '../support/broker-rig.ts';
import { stationText } from '../support/fault-station.ts';
import { hasTool } from '../support/tools.ts';

const haveSystemd = hasTool('systemd-notify') && hasTool('systemd-analyze') && hasTool('perl');
if (!haveSystemd) console.log('NOT TESTED: what systemd is told, for want of systemd or perl');

const undo: (() => void | Promise<void>)[] = [];
afterEach(async () => {
  for (const step of undo.splice(0).reverse()) await step();
});

/** Takes no descriptors along with a message, so that `systemd-notify`, which passes one and waits for its end, goes on. */
const RECEIVER = `use Socket; $| = 1; socket(my $s, AF_UNIX, SOCK_DGRAM, 0) or die; bind($s, sockaddr_un($ARGV[0])) or die;
while (defined recv($s, my $message, 4096, 0)) { print "$message\\n" }`;

/** Stands for systemd: a datagram socket, and what came into it. */
async function listenAsSystemd(): Promise<{ path: string; heard: () => string[] }> {
  const folder = mkdtempSync(join(tmpdir(), 'forebay-notify-'));
  const path = join(folder, 'socket');
  const child: ChildProcess = spawn('perl', ['-e', RECEIVER, path]);
  let text = '';
  child.stdout?.on('data', (chunk) => {
    text += String(chunk);
  });
  undo.push(() => {
    child.kill('SIGKILL');
    rmSync(folder, { recursive: true, force: true });
  });
  await until(() => existsSync(path), 'the socket');
  return { path, heard: () => text.match(/(READY|WATCHDOG|STOPPING)=1/g) ?? [] };
}

describe.runIf(haveSystemd)('the service manager', () => {
  it('is told', async () => {
    const { path, heard } = await listenAsSystemd();
    const failures: Error[] = [];
    const before = process.env.NOTIFY_SOCKET;
    process.env.NOTIFY_SOCKET = path;
    undo.push(() => {
      if (before === undefined) delete process.env.NOTIFY_SOCKET;
      else process.env.NOTIFY_SOCKET = before;
    });
    const manager = new ServiceManager({ NOTIFY_SOCKET: path, WATCHDOG_USEC: '60000000' }, (error) =>
      failures.push(error),
    );
    expect(manager.watchdogS).toBe(60);
    await manager.ready();
    await manager.alive();
    await manager.stopping();
    await until(() => heard().length === 3, 'three messages');
    expect(heard()).toEqual(['READY=1', 'WATCHDOG=1', 'STOPPING=1']);
    expect(failures).toEqual([]);
  });

  it('hears of a real agent whose broker is away: ready, alive, and stopping', {
    timeout: 40_000,
  }, async () => {
    const { path, heard } = await listenAsSystemd();
    // Port 9 (discard, RFC 863) is closed: an outage from the start.
    const agent = new AgentProcess(stationText(9));
    undo.push(() => agent.dispose());
    agent.env = { ...process.env, NOTIFY_SOCKET: path, WATCHDOG_USEC: '4000000' };
    await agent.start();
    await until(
      () => heard().filter((message) => message === 'WATCHDOG=1').length >= 4,
      'signs of life',
      15_000,
    );
    expect(await agent.stop()).toBe(0);
    await until(() => heard().at(-1) === 'STOPPING=1', 'the end');
    expect(heard()[0]).toBe('READY=1');
    expect(agent.text).not.toContain('service manager');
  });
});

describe('where no service manager listens', () => {
  it('nothing is started and no watchdog is kept', async () => {
    const failures: Error[] = [];
    const manager = new ServiceManager({ WATCHDOG_USEC: '60000000' }, (error) => failures.push(error));
    expect(manager.watchdogS).toBeNull();
    const path = process.env.PATH;
    process.env.PATH = '/nowhere';
    undo.push(() => {
      process.env.PATH = path;
    });
    await manager.ready();
    expect(failures).toEqual([]);
    // The same with a socket fails, so that something would have been noticed.
    await new ServiceManager({ NOTIFY_SOCKET: '/nowhere/socket' }, (error) => failures.push(error)).ready();
    expect(failures).toHaveLength(1);
  });

  it('a watchdog that belongs to another process is not kept', () => {
    const env = { NOTIFY_SOCKET: '/x', WATCHDOG_USEC: '1000000' };
    const other = { ...env, WATCHDOG_PID: String(process.pid + 1) };
    expect(new ServiceManager(other, () => undefined).watchdogS).toBeNull();
    expect(new ServiceManager({ ...env, WATCHDOG_PID: String(process.pid) }, () => undefined).watchdogS).toBe(
      1,
    );
  });
});

describe('the watchdog', () => {
  /** A minute of ticks with one part that stands still from the 10th second on; when it was kicked. */
  async function kicks(
    still: 'link' | 'database' | 'measuring' | 'nothing',
    idle = false,
  ): Promise<number[]> {
    const times: number[] = [];
    let nowS = 0;
    const manager = {
      watchdogS: 8,
      alive: async () => void times.push(nowS),
    } as unknown as ServiceManager;
    const lines: string[] = [];
    const counts = { link: 0, measuring: 0 };
    const supervision = new Supervision(manager, {
      links: () => ({
        'node-1': { bytes: counts.link, opened: 1, refused: 0, silent: 0, unplugged: 0 } as LinkHealth,
      }),
      measuring: () => ({ waiting: idle ? 0 : 1, settled: counts.measuring }),
      store: {
        budget: () =>
          still === 'database' && nowS >= 10 ? new Promise(() => undefined) : Promise.resolve([]),
      },
      monotonicS: () => nowS,
      log: new Log(() => nowS, { write: (line) => void lines.push(line) }),
    });
    for (; nowS < 90; nowS++) {
      if (still !== 'link' || nowS < 10) counts.link += 1000;
      if (still !== 'measuring' || nowS < 10) counts.measuring++;
      supervision.tick();
      await Promise.resolve();
      await new Promise((resolve) => setImmediate(resolve));
    }
    expect(lines.length > 0).toBe(times.at(-1)! < 80);
    return times;
  }

  it('is kicked four times a period while everything moves', async () => {
    const times = await kicks('nothing');
    expect(times[0]).toBe(0);
    const pauses = times.slice(1).map((at, i) => at - times[i]!);
    expect(new Set(pauses)).toEqual(new Set([2]));
  });

  it.each(['link', 'database', 'measuring'] as const)('is left alone once %s stands still', async (what) => {
    const last = (await kicks(what)).at(-1)!;
    expect(last).toBeGreaterThanOrEqual(STUCK_AFTER_S - 2);
    expect(last).toBeLessThanOrEqual(10 + STUCK_AFTER_S + 12);
  });

  it('does not ask for readings where nothing is to be measured', async () => {
    expect((await kicks('measuring', true)).at(-1)).toBeGreaterThan(80);
  });
});

describe.runIf(haveSystemd)('the unit that ships', () => {
  const path = fileURLToPath(new URL('../../scripts/forebay.service', import.meta.url));

  it('is well-formed for systemd itself, and exposes little', () => {
    const folder = mkdtempSync(join(tmpdir(), 'forebay-unit-'));
    undo.push(() => rmSync(folder, { recursive: true, force: true }));
    const copy = join(folder, 'forebay.service');
    // This machine may have Node elsewhere.
    writeFileSync(copy, readFileSync(path, 'utf8').replaceAll('/usr/bin/node', process.execPath));
    const verified = spawnSync('systemd-analyze', ['verify', '--man=no', copy], { encoding: 'utf8' });
    expect(verified.stderr).toBe('');
    expect(verified.status).toBe(0);
    const security = spawnSync('systemd-analyze', ['security', '--offline=true', copy], { encoding: 'utf8' });
    const level = /exposure level for forebay\.service: ([\d.]+)/.exec(security.stdout)?.[1];
    expect(Number(level)).toBeLessThan(3);
  });

  it('leaves out what breaks Node or serial devices, and gives up never', () => {
    const settings = readFileSync(path, 'utf8')
      .split('\n')
      .filter((line) => /^[A-Z]\w+=/.test(line));
    const of = (name: string) => settings.filter((line) => line.startsWith(`${name}=`));
    expect(of('MemoryDenyWriteExecute')).toEqual([]);
    expect(of('PrivateDevices')).toEqual([]);
    expect(of('DeviceAllow').map((line) => line.split(/[= ]/)[1])).toEqual([
      'char-ttyUSB',
      'char-ttyACM',
      'char-ttyAMA',
      'char-ttyS',
    ]);
    expect(of('StartLimitIntervalSec')).toEqual(['StartLimitIntervalSec=0']);
    expect(of('NotifyAccess')).toEqual(['NotifyAccess=all']);
    expect(of('RestrictAddressFamilies')[0]).toMatch(/AF_UNIX.*AF_NETLINK/);
  });
});
