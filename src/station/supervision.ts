/**
 * The watchdog of the service manager, kicked from the main thread only while links, database and measuring move.
 * The broker has no part in it: an outage of the network is no reason to start again.
 */

import type { LinkHealth } from '../link/link-health.ts';
import type { Store } from '../store/types.ts';
import type { Log } from './log.ts';
import { Progress } from './progress.ts';
import type { ServiceManager } from './service-manager.ts';

const PROBE_EVERY_S = 10;
/** A kick may be late by a stall of the machine and by what it takes to start a process. */
const KICKS_PER_PERIOD = 4;

export interface Watched {
  links(): Readonly<Record<string, LinkHealth>>;
  measuring(): { waiting: number; settled: number };
  store: Pick<Store, 'budget'>;
  monotonicS(): number;
  log: Log;
}

export class Supervision {
  readonly #manager: ServiceManager;
  readonly #watched: Watched;
  readonly #progress: Progress;
  #probes = 0;
  #probeS = Number.NEGATIVE_INFINITY;
  #probing = false;
  #kickS = Number.NEGATIVE_INFINITY;

  constructor(manager: ServiceManager, watched: Watched) {
    this.#manager = manager;
    this.#watched = watched;
    this.#progress = new Progress(watched.monotonicS);
  }

  /** Once a second, from the main loop. */
  tick(): void {
    const period = this.#manager.watchdogS;
    if (period === null) return;
    const nowS = this.#watched.monotonicS();
    this.#probe(nowS);
    const { waiting, settled } = this.#watched.measuring();
    const links = Object.entries(this.#watched.links()).map(([id, health]) => [`link ${id}`, moved(health)]);
    const stuck = this.#progress.stuck({
      ...Object.fromEntries(links),
      database: this.#probes,
      measuring: waiting === 0 ? null : settled,
    });
    if (stuck.length > 0) {
      this.#watched.log.warn('stuck: the watchdog is left to bark', { stuck });
      return;
    }
    if (nowS - this.#kickS < period / KICKS_PER_PERIOD) return;
    this.#kickS = nowS;
    void this.#manager.alive();
  }

  /** A small read: whoever answers it, with a result or with a complaint about the disk, is not stuck. */
  #probe(nowS: number): void {
    if (this.#probing || nowS - this.#probeS < PROBE_EVERY_S) return;
    this.#probeS = nowS;
    this.#probing = true;
    this.#watched.store
      .budget(0)
      .then(
        () => this.#probes++,
        (error: { code?: string }) => {
          if (error.code !== 'store.stopped') this.#probes++;
        },
      )
      .finally(() => {
        this.#probing = false;
      });
  }
}

/** Bytes came, or the port was tried: a link that is silent or unplugged is opened again every few seconds. */
function moved({ bytes, opened, refused, silent, unplugged }: LinkHealth): number {
  return bytes + opened + refused + silent + unplugged;
}
