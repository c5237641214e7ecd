/** The agent of the demo: the real one, in a process of its own, so that the simulation does not load its threads. */

import { type ChildProcess, spawn } from 'node:child_process';
import { closeSync, openSync, readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';

const patienceMs = 8000;
const lastLines = 12;

export class DemoAgent {
  readonly #child: ChildProcess;
  readonly #logFile: string;
  readonly #ended: Promise<void>;
  #over = false;

  constructor(stationFile: string, logFile: string) {
    const log = openSync(logFile, 'w');
    const main = fileURLToPath(new URL('./main.js', import.meta.url));
    this.#logFile = logFile;
    this.#child = spawn(process.execPath, [main, 'run', '-c', stationFile], { stdio: ['ignore', log, log] });
    closeSync(log);
    // A demo that falls over must not leave an agent behind that holds devices and a port.
    const end = () => this.#child.kill('SIGKILL');
    process.once('exit', end);
    this.#ended = new Promise((resolve) => {
      const over = () => {
        this.#over = true;
        process.off('exit', end);
        resolve();
      };
      this.#child.on('error', over);
      this.#child.on('exit', over);
    });
  }

  get ended(): Promise<void> {
    return this.#ended;
  }

  /** The end of its log, for when something went wrong. */
  lastWords(): string[] {
    return readFileSync(this.#logFile, 'utf8').trimEnd().split('\n').slice(-lastLines);
  }

  /** Asks it to end, and ends it where it does not. */
  async stop(): Promise<void> {
    if (this.#over) return;
    this.#child.kill('SIGTERM');
    const impatience = setTimeout(() => this.#child.kill('SIGKILL'), patienceMs);
    await this.#ended;
    clearTimeout(impatience);
  }
}
