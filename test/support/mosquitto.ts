/** A real mosquitto on a loopback port of its own, that can be killed, paused and started again. */
import type { ChildProcess } from 'node:child_process';
import { once } from 'node:events';
import { existsSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { connect, createServer } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { spawnDependent } from './dependent.ts';
import { hasTool } from './tools.ts';

export const haveMosquitto = hasTool('mosquitto') && hasTool('mosquitto_sub');
if (!haveMosquitto) console.log('NOT TESTED: a real broker, for want of mosquitto and mosquitto-clients');

const binary = existsSync('/usr/sbin/mosquitto') ? '/usr/sbin/mosquitto' : 'mosquitto';

export async function freePort(): Promise<number> {
  const server = createServer().listen(0, '127.0.0.1');
  await once(server, 'listening');
  const address = server.address();
  server.close();
  await once(server, 'close');
  if (address === null || typeof address === 'string') throw new Error('no port');
  return address.port;
}

async function answers(port: number): Promise<boolean> {
  const socket = connect(port, '127.0.0.1');
  try {
    await once(socket, 'connect');
    return true;
  } catch {
    return false;
  } finally {
    socket.destroy();
  }
}

export class Mosquitto {
  readonly port: number;
  readonly folder: string;
  readonly #config: string;
  #child: ChildProcess | null = null;

  private constructor(port: number, folder: string, config: string) {
    this.port = port;
    this.folder = folder;
    this.#config = config;
  }

  /** `lines` go under the listener; `PORT` and `FOLDER` in them are filled in. */
  static async start(
    lines: readonly string[] = ['allow_anonymous true'],
    files: Record<string, string> = {},
  ) {
    const port = await freePort();
    const folder = mkdtempSync(join(tmpdir(), 'forebay-mosquitto-'));
    for (const [name, text] of Object.entries(files))
      writeFileSync(join(folder, name), text, { mode: 0o644 });
    const text = [`listener ${port} 127.0.0.1`, ...lines].join('\n').replaceAll('FOLDER', folder);
    const config = join(folder, 'mosquitto.conf');
    // As root mosquitto would change its user, and with it lose sight of the folder.
    writeFileSync(config, `${text}\nuser root\nlog_dest none\n`);
    const broker = new Mosquitto(port, folder, config);
    await broker.restart();
    return broker;
  }

  async restart(): Promise<void> {
    const child = spawnDependent(binary, ['-c', this.#config], { stdio: ['ignore', 'ignore', 'pipe'] });
    let said = '';
    child.stderr?.on('data', (chunk) => {
      said += String(chunk);
    });
    this.#child = child;
    while (!(await answers(this.port))) {
      if (child.exitCode !== null) throw new Error(`mosquitto ended with ${child.exitCode}: ${said}`);
      await new Promise((resolve) => setTimeout(resolve, 10));
    }
  }

  async kill(signal: NodeJS.Signals = 'SIGKILL'): Promise<void> {
    const child = this.#child;
    if (child === null || child.exitCode !== null || child.signalCode !== null) return;
    const ended = once(child, 'exit');
    child.kill(signal);
    await ended;
  }

  pause(): void {
    this.#child?.kill('SIGSTOP');
  }

  signal(signal: NodeJS.Signals): void {
    this.#child?.kill(signal);
  }

  resume(): void {
    this.#child?.kill('SIGCONT');
  }

  async stop(): Promise<void> {
    await this.kill();
    rmSync(this.folder, { recursive: true, force: true });
  }
}
