/** The real agent as a process of its own, as an installer starts it. */
import { type ChildProcess, spawn } from 'node:child_process';
import { once } from 'node:events';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { sleep } from './proxy.ts';

export const command = fileURLToPath(new URL('../../dist/cli/main.js', import.meta.url));

export class AgentProcess {
  readonly folder: string;
  readonly stationFile: string;
  #child: ChildProcess | null = null;
  #log = '';

  /** @param station text of the station file; FOLDER in it is filled in. */
  constructor(station: string) {
    this.folder = mkdtempSync(join(tmpdir(), 'forebay-agent-'));
    this.stationFile = join(this.folder, 'station.yaml');
    writeFileSync(this.stationFile, station.replaceAll('FOLDER', this.folder));
  }

  get log(): readonly Record<string, unknown>[] {
    const lines = this.#log.split('\n').slice(0, -1);
    return lines.map((line) => JSON.parse(line) as Record<string, unknown>);
  }

  async start(): Promise<void> {
    const child = spawn(process.execPath, [command, 'run', '-c', this.stationFile], {
      stdio: ['ignore', 'inherit', 'pipe'],
    });
    this.#child = child;
    child.stderr?.on('data', (chunk) => {
      this.#log += String(chunk);
    });
    const seen = this.log.length;
    while (!this.log.slice(seen).some(({ msg }) => msg === 'running')) {
      if (child.exitCode !== null) throw new Error(`the agent ended with ${child.exitCode}: ${this.#log}`);
      await sleep(20);
    }
  }

  /** Stops as systemd would; gives the exit status. */
  async stop(signal: NodeJS.Signals = 'SIGTERM'): Promise<number | null> {
    const child = this.#child;
    if (!child || child.exitCode !== null || child.signalCode !== null) return child?.exitCode ?? null;
    const ended = once(child, 'exit');
    child.kill(signal);
    await ended;
    // The log's last lines may still be under way.
    await sleep(20);
    return child.exitCode;
  }

  async dispose(): Promise<void> {
    await this.stop('SIGKILL');
    rmSync(this.folder, { recursive: true, force: true });
  }
}
