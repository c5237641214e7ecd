/** A pair of pseudo-terminals made by socat: what is written into one is read from the other, as over a cable. */
import { type ChildProcess, spawn } from 'node:child_process';
import { closeSync, constants, existsSync, openSync, writeSync } from 'node:fs';
import { sleep } from './proxy.ts';
import { hasTool } from './tools.ts';

export const haveSocat = hasTool('socat');
if (!haveSocat) console.log('NOT TESTED: serial devices by socat, for want of socat');

export class SocatCable {
  /** The device that the agent opens. */
  readonly device: string;
  readonly #child: ChildProcess;
  readonly #far: number;
  #waiting: Uint8Array[] = [];
  #retry: NodeJS.Timeout | null = null;

  private constructor(device: string, child: ChildProcess, far: number) {
    this.device = device;
    this.#child = child;
    this.#far = far;
  }

  static async lay(device: string): Promise<SocatCable> {
    const far = `${device}.far`;
    const ends = [device, far].map((path) => `pty,raw,echo=0,link=${path}`);
    const child = spawn('socat', ['-b65536', ...ends], { stdio: 'ignore' });
    while (!(existsSync(device) && existsSync(far))) {
      if (child.exitCode !== null) throw new Error(`socat ended with ${child.exitCode}`);
      await sleep(10);
    }
    const fd = openSync(far, constants.O_WRONLY | constants.O_NONBLOCK | constants.O_NOCTTY);
    return new SocatCable(device, child, fd);
  }

  /** Bytes that the cable has not taken yet. */
  get waitingBytes(): number {
    return this.#waiting.reduce((sum, bytes) => sum + bytes.length, 0);
  }

  /** A sender with a buffer of its own: what finds no room waits, in order. */
  write(bytes: Uint8Array): void {
    this.#waiting.push(bytes);
    this.#flush();
  }

  #flush(): void {
    if (this.#retry) clearTimeout(this.#retry);
    this.#retry = null;
    for (let next = this.#waiting[0]; next; next = this.#waiting[0]) {
      let taken = 0;
      try {
        taken = writeSync(this.#far, next);
      } catch (error) {
        if ((error as NodeJS.ErrnoException).code !== 'EAGAIN') throw error;
      }
      if (taken < next.length) {
        this.#waiting[0] = next.subarray(taken);
        this.#retry = setTimeout(() => this.#flush(), 2);
        return;
      }
      this.#waiting.shift();
    }
  }

  /** Pulls the cable: the device goes away under its reader. */
  cut(): void {
    if (this.#retry) clearTimeout(this.#retry);
    this.#waiting = [];
    closeSync(this.#far);
    this.#child.kill('SIGKILL');
  }
}
