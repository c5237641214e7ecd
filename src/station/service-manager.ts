/**
 * Tells systemd how the agent is, by its own `systemd-notify`: Node speaks no datagrams over Unix sockets. Where no
 * NOTIFY_SOCKET is set nobody listens, and nothing is started.
 */

import { execFile } from 'node:child_process';

/** The same message a second time waits for the first, and is dropped: the manager wants the newest only. */
const TIMEOUT_MS = 5000;

export class ServiceManager {
  /** How long systemd waits for a sign of life, in seconds; null: it does not. */
  readonly watchdogS: number | null;
  readonly #listening: boolean;
  readonly #failed: (error: Error) => void;
  #underWay = new Set<string>();

  /** @param failed told when a message could not be sent. */
  constructor(env: NodeJS.ProcessEnv, failed: (error: Error) => void) {
    this.#listening = (env.NOTIFY_SOCKET ?? '') !== '';
    const microseconds = Number(env.WATCHDOG_USEC);
    const mine = env.WATCHDOG_PID === undefined || Number(env.WATCHDOG_PID) === process.pid;
    this.watchdogS = this.#listening && mine && microseconds > 0 ? microseconds / 1e6 : null;
    this.#failed = failed;
  }

  ready(): Promise<void> {
    return this.#send('READY=1');
  }

  alive(): Promise<void> {
    return this.#send('WATCHDOG=1');
  }

  stopping(): Promise<void> {
    return this.#send('STOPPING=1');
  }

  /** One line for `systemctl status`. */
  status(text: string): Promise<void> {
    return this.#send(`STATUS=${text.replaceAll('\n', ' ')}`);
  }

  /** Resolves when the manager has it, or it was given up; never rejects. */
  #send(message: string): Promise<void> {
    if (!this.#listening || this.#underWay.has(message)) return Promise.resolve();
    this.#underWay.add(message);
    return new Promise((resolve) => {
      execFile('systemd-notify', [message], { timeout: TIMEOUT_MS }, (error) => {
        this.#underWay.delete(message);
        if (error) this.#failed(error);
        resolve();
      });
    });
  }
}
