/** The real agent as a process of its own, as an installer starts it. */
import { type ChildProcess, spawn } from 'node:child_process';
import { once } from 'node:events';
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { spawnDependent } from './dependent.ts';
import { sleep } from './proxy.ts';

export const command = fileURLToPath(new URL('../../dist/cli/main.js', import.meta.url));

/** Runs a command to its end; `out` is what it printed, errors included. */
export async function forebay(...args: string[]): Promise<{ status: number | null; out: string }> {
  const child = spawn(process.execPath, [command, ...args], { stdio: ['ignore', 'pipe', 'pipe'] });
  let out = '';
  for (const stream of [child.stdout, child.stderr]) {
    stream.on('data', (chunk) => {
      out += String(chunk);
    });
  }
  const [status] = (await once(child, 'close')) as [number | null];
  return { status, out };
}

export class AgentProcess {
  readonly folder: string;
  readonly stationFile: string;
  /** For the next start. */
  env: NodeJS.ProcessEnv = process.env;
  nodeArgs: readonly string[] = [];
  #child: ChildProcess | null = null;
  readonly #log: Record<string, unknown>[] = [];
  /** All that was written to standard error, to the end of the last line. */
  text = '';
  #rest = '';

  /** @param station text of the station file; FOLDER in it is filled in. */
  constructor(station: string) {
    this.folder = mkdtempSync(join(tmpdir(), 'forebay-agent-'));
    this.stationFile = join(this.folder, 'station.yaml');
    this.configure(station);
  }

  /** Writes the station file anew. */
  configure(station: string): void {
    writeFileSync(this.stationFile, station.replaceAll('FOLDER', this.folder));
  }

  get log(): readonly Record<string, unknown>[] {
    return this.#log;
  }

  get pid(): number {
    const pid = this.#child?.pid;
    if (pid === undefined) throw new Error('the agent does not run');
    return pid;
  }

  get running(): boolean {
    return this.#child !== null && this.#child.exitCode === null && this.#child.signalCode === null;
  }

  async start(): Promise<void> {
    const args = [...this.nodeArgs, command, 'run', '-c', this.stationFile];
    // Left behind, it would go on opening devices whose names belong to somebody else by then.
    const child = spawnDependent(process.execPath, args, {
      stdio: ['ignore', 'inherit', 'pipe'],
      env: this.env,
    });
    this.#child = child;
    const seen = this.#log.length;
    child.stderr?.on('data', (chunk) => this.#take(String(chunk)));
    while (!this.#log.slice(seen).some(({ msg }) => msg === 'running')) {
      if (child.exitCode !== null || child.signalCode !== null)
        throw new Error(
          `the agent ended with ${child.exitCode ?? child.signalCode}: ${this.text}${this.#rest}`,
        );
      await sleep(20);
    }
  }

  signal(signal: NodeJS.Signals): void {
    this.#child?.kill(signal);
  }

  /** Stops as systemd would; gives the exit status. */
  async stop(signal: NodeJS.Signals = 'SIGTERM'): Promise<number | null> {
    const child = this.#child;
    if (!child || !this.running) return child?.exitCode ?? null;
    const ended = once(child, 'exit');
    child.kill(signal);
    await ended;
    // The log's last lines may still be under way.
    await sleep(20);
    return child.exitCode;
  }

  /** Resident memory in bytes, from the kernel (proc(5), statm in pages of 4096). */
  memoryBytes(): number {
    return Number(readFileSync(`/proc/${this.pid}/statm`, 'utf8').split(' ')[1]) * 4096;
  }

  descriptors(): number {
    return readdirSync(`/proc/${this.pid}/fd`).length;
  }

  async dispose(): Promise<void> {
    await this.stop('SIGKILL');
    rmSync(this.folder, { recursive: true, force: true });
  }

  #take(chunk: string): void {
    const lines = (this.#rest + chunk).split('\n');
    this.#rest = lines.pop() ?? '';
    for (const line of lines) {
      this.text += `${line}\n`;
      try {
        this.#log.push(JSON.parse(line) as Record<string, unknown>);
      } catch {
        // Not from the log: a crash, or a warning of Node.
      }
    }
  }
}
