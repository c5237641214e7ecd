/**
 * Keeps one transport open: opens it, watches that bytes come, closes and reopens it when they do not, for as long
 * as it runs. A device that goes away often tells nobody, so only bytes count as life.
 *
 * Waiting between tries doubles from a quarter of a second to four seconds, a quarter more or less by chance, and
 * starts over once bytes came: with a silence of three seconds and a DESCRIBE every two, samples flow again within
 * ten seconds of the cause's end.
 */

import { OpenError, type Transport, textOf } from './transport.ts';

const FIRST_WAIT_MS = 250;
const LONGEST_WAIT_MS = 4000;
const JITTER = 0.25;
const OPEN_TIMEOUT_MS = 5000;
const CLOSE_TIMEOUT_MS = 2000;
const WATCH_MS = 500;
export const SILENT_AFTER_MS = 3000;

/** Time and chance, given from outside. */
export interface Clock {
  /** Monotonic, in milliseconds. */
  now(): number;
  /** Calls once after so long; returns what cancels it. */
  after(ms: number, call: () => void): () => void;
  /** In [0, 1). */
  random(): number;
}

export type SupervisorState =
  | { readonly kind: 'opening' }
  | { readonly kind: 'open' }
  /** It could not be opened, and is tried again. */
  | { readonly kind: 'refused'; readonly error: OpenError }
  /** Open, but no bytes for a while; it is reopened meanwhile. */
  | { readonly kind: 'silent'; readonly why: string }
  /** It was open and went away. */
  | { readonly kind: 'unplugged'; readonly why: string }
  | { readonly kind: 'stopped' };

export interface SupervisorHost {
  onBytes(chunk: Uint8Array): void;
  /** A new connection: what is half received belongs to the old one. */
  onOpened(): void;
  onState(state: SupervisorState): void;
}

export class Supervisor {
  readonly counts = { opened: 0, refused: 0, silent: 0, unplugged: 0, reopened: 0 };
  readonly #make: () => Transport;
  readonly #clock: Clock;
  readonly #host: SupervisorHost;
  #state: SupervisorState = { kind: 'stopped' };
  #transport: Transport | null = null;
  /** Events of an earlier transport carry an earlier number and are ignored. */
  #generation = 0;
  #running = false;
  #tries = 0;
  #lastBytesMs = 0;
  #cancelTimer: () => void = () => undefined;
  #closing: Promise<void> = Promise.resolve();

  constructor(make: () => Transport, clock: Clock, host: SupervisorHost) {
    this.#make = make;
    this.#clock = clock;
    this.#host = host;
  }

  get state(): SupervisorState {
    return this.#state;
  }

  start(): void {
    if (this.#running) return;
    this.#running = true;
    this.#tries = 0;
    this.#become({ kind: 'opening' });
    void this.#open();
  }

  async stop(): Promise<void> {
    this.#running = false;
    this.#letGo();
    this.#become({ kind: 'stopped' });
    await this.#closing;
  }

  /** Closes and reopens at once, where what comes is of no use (line settings changed behind our back). */
  reopen(): void {
    if (!this.#running || this.#transport === null) return;
    this.counts.reopened++;
    this.#letGo();
    this.#retryIn(0);
  }

  async #open(): Promise<void> {
    const generation = ++this.#generation;
    const current = () => this.#running && generation === this.#generation;
    await this.#closing;
    if (!current()) return;
    const transport = this.#make();
    this.#transport = transport;
    try {
      await this.#withTimeout(
        transport.open({
          onBytes: (chunk) => {
            if (current()) this.#bytes(chunk);
          },
          onClosed: (why) => {
            if (current()) this.#unplugged(why);
          },
        }),
        OPEN_TIMEOUT_MS,
      );
    } catch (error) {
      if (current()) this.#refused(error);
      return;
    }
    if (!current()) return;
    this.counts.opened++;
    this.#lastBytesMs = this.#clock.now();
    this.#host.onOpened();
    // A silent line is still silent when it has merely been opened again.
    if (this.#state.kind !== 'silent') this.#become({ kind: 'open' });
    this.#watch();
  }

  #watch(): void {
    const due = this.#clock.now() + WATCH_MS;
    this.#cancelTimer = this.#clock.after(WATCH_MS, () => {
      const now = this.#clock.now();
      // Where this very thread stalled, the bytes that came meanwhile are read only after this timer.
      const stalled = now - due > WATCH_MS;
      if (stalled || now - this.#lastBytesMs < SILENT_AFTER_MS) {
        this.#watch();
        return;
      }
      if (this.#state.kind !== 'silent') this.counts.silent++;
      this.#letGo();
      this.#become({ kind: 'silent', why: `no bytes for ${SILENT_AFTER_MS / 1000} s` });
      // Mostly open: a node that is switched on again is heard at once.
      this.#retryIn(FIRST_WAIT_MS);
    });
  }

  #bytes(chunk: Uint8Array): void {
    this.#lastBytesMs = this.#clock.now();
    this.#tries = 0;
    if (this.#state.kind !== 'open') this.#become({ kind: 'open' });
    this.#host.onBytes(chunk);
  }

  #unplugged(why: string): void {
    this.counts.unplugged++;
    this.#letGo();
    this.#become({ kind: 'unplugged', why });
    this.#retryLater();
  }

  #refused(error: unknown): void {
    this.counts.refused++;
    this.#letGo();
    const known =
      error instanceof OpenError
        ? error
        : new OpenError('other', textOf(error), 'See what the operating system says.', { cause: error });
    this.#become({ kind: 'refused', error: known });
    this.#retryLater();
  }

  #retryLater(): void {
    const wait = Math.min(LONGEST_WAIT_MS, FIRST_WAIT_MS * 2 ** this.#tries);
    this.#tries++;
    this.#retryIn(wait * (1 + JITTER * (2 * this.#clock.random() - 1)));
  }

  #retryIn(ms: number): void {
    this.#cancelTimer = this.#clock.after(ms, () => void this.#open());
  }

  /** Closes the transport; the next open waits for that, for a bounded time. */
  #letGo(): void {
    this.#generation++;
    this.#cancelTimer();
    const transport = this.#transport;
    this.#transport = null;
    if (transport)
      this.#closing = this.#withTimeout(transport.close(), CLOSE_TIMEOUT_MS).catch(() => undefined);
  }

  #become(state: SupervisorState): void {
    this.#state = state;
    this.#host.onState(state);
  }

  #withTimeout<T>(promise: Promise<T>, ms: number): Promise<T> {
    return new Promise((resolve, reject) => {
      const cancel = this.#clock.after(ms, () =>
        reject(
          new OpenError('timeout', `no answer within ${ms / 1000} s`, 'See whether the device is powered.'),
        ),
      );
      promise.then(resolve, reject).finally(cancel);
    });
  }
}
