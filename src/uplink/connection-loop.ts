/**
 * Keeps a connection to the broker: one at a time, each with a number of its own, with a jittered pause between two
 * of them. MQTT 5 is tried first where the station leaves it open; 3.1.1 follows when the broker says that it does
 * not know 5, or hangs up before its answer twice in a row, and on nothing else.
 */

import type { Connection, End } from './connection.ts';

export interface LoopHost {
  /** Makes the next connection; throws when its files cannot be read. */
  connect(protocol: 4 | 5, up: () => void, down: (end: End) => void): Promise<Connection>;
  /** Called at the end of each connection and each failed attempt, with the pause that follows. */
  ended(end: End, pauseMs: number): void;
}

export interface LoopSettings {
  readonly protocol: 4 | 5 | null;
  readonly firstPauseMs: number;
  readonly longestPauseMs: number;
  /** A connection that held so long clears the record of failures. */
  readonly steadyMs: number;
  readonly random: () => number;
}

const shortestRefusedPauseMs = 10_000;

export class ConnectionLoop {
  readonly #settings: LoopSettings;
  readonly #host: LoopHost;
  #protocol: 4 | 5;
  #generation = 0;
  #failures = 0;
  #closedEarly = 0;
  #timer: NodeJS.Timeout | null = null;
  #connection: Connection | null = null;
  #stopped = true;

  constructor(settings: LoopSettings, host: LoopHost) {
    this.#settings = settings;
    this.#host = host;
    this.#protocol = settings.protocol ?? 5;
  }

  get connection(): Connection | null {
    return this.#connection?.isUp === true ? this.#connection : null;
  }

  start(): void {
    this.#stopped = false;
    void this.#attempt();
  }

  /** No further attempt; hands back the connection for its goodbye. */
  stop(): Connection | null {
    this.#stopped = true;
    if (this.#timer !== null) clearTimeout(this.#timer);
    return this.#connection;
  }

  /** What ended the connections before is gone: the next attempt comes as soon as after a first failure. */
  soon(): void {
    this.#failures = 0;
    if (this.#timer === null || this.#stopped) return;
    clearTimeout(this.#timer);
    this.#attemptIn(this.#settings.firstPauseMs);
  }

  #attemptIn(pauseMs: number): void {
    this.#timer = setTimeout(() => {
      this.#timer = null;
      void this.#attempt();
    }, pauseMs);
  }

  async #attempt(): Promise<void> {
    const generation = ++this.#generation;
    let steady: NodeJS.Timeout | undefined;
    const down = (end: End) => {
      clearTimeout(steady);
      if (generation !== this.#generation) return;
      this.#connection = null;
      this.#ended(end);
    };
    const up = () => {
      this.#closedEarly = 0;
      steady = setTimeout(() => {
        this.#failures = 0;
      }, this.#settings.steadyMs);
    };
    try {
      const connection = await this.#host.connect(this.#protocol, up, down);
      if (this.#stopped) connection.kill('the agent stops');
      else if (generation === this.#generation) this.#connection = connection;
    } catch (error) {
      down({ kind: 'failed', error: error as Error });
    }
  }

  #ended(end: End): void {
    if (this.#stopped) return;
    const atOnce = this.#chooseProtocol(end);
    const pauseMs = atOnce ? 0 : this.#pauseMs(end);
    if (!atOnce) this.#failures++;
    this.#host.ended(end, pauseMs);
    this.#attemptIn(pauseMs);
  }

  /** True: the other version is to be tried at once. */
  #chooseProtocol(end: End): boolean {
    if (this.#settings.protocol !== null) return false;
    this.#closedEarly = end.kind === 'closed-early' ? this.#closedEarly + 1 : 0;
    if (end.kind !== 'version' && this.#closedEarly < 2) return false;
    this.#closedEarly = 0;
    // Back to 5 as well: a broker that hung up for a reason of its own must not cost it for good.
    const was = this.#protocol;
    this.#protocol = was === 5 ? 4 : 5;
    return was === 5;
  }

  #pauseMs(end: End): number {
    const { firstPauseMs, longestPauseMs, random } = this.#settings;
    const full = Math.min(longestPauseMs, firstPauseMs * 2 ** Math.min(this.#failures, 20));
    const pauseMs = full * (0.5 + random() / 2);
    // Who is refused by name gets locked out by hurrying.
    return end.kind === 'refused'
      ? Math.max(pauseMs, Math.min(shortestRefusedPauseMs, longestPauseMs))
      : pauseMs;
  }
}
