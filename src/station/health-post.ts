/** Gathers `health` and puts it into the outbox when it is time. */

import type { LinkHealth } from '../link/link-health.ts';
import type { Store } from '../store/types.ts';
import type { MessageIds } from '../uplink/message-ids.ts';
import { outboxMessage } from '../uplink/payload.ts';
import type { Uplink } from '../uplink/uplink.ts';
import { type HealthSources, healthBody } from './health.ts';
import { HealthSchedule } from './health-schedule.ts';
import type { Vitals } from './vitals.ts';

export interface HealthHost {
  readonly store: Pick<Store, 'counters' | 'commit'>;
  readonly ids: MessageIds;
  readonly vitals: Vitals;
  readonly directory: string;
  uplink(): Pick<Uplink, 'status' | 'kick' | 'topics'>;
  links(): Readonly<Record<string, LinkHealth>>;
  measuring(): HealthSources['measuring'];
  snapshots(): HealthSources['snapshots'];
  now(): string;
  failed(error: unknown): void;
}

export class HealthPost {
  readonly #host: HealthHost;
  readonly #schedule: HealthSchedule;
  /** Links that are not receiving. */
  readonly #troubled = new Set<string>();

  constructor(host: HealthHost, nowS: number) {
    this.#host = host;
    this.#schedule = new HealthSchedule(nowS);
  }

  /** Something of the gateway went wrong or right again. */
  changed(nowS: number): void {
    this.#schedule.changed(nowS);
  }

  linkChanged(link: string, receiving: boolean, nowS: number): void {
    // That a link receives is news only after it did not.
    if (!receiving || this.#troubled.has(link)) this.changed(nowS);
    if (receiving) this.#troubled.delete(link);
    else this.#troubled.add(link);
  }

  /** Once a second. */
  tick(nowS: number): void {
    const links = this.#host.links();
    const { missed, skipped } = this.#host.measuring();
    const errors = Object.values(links).reduce((all, link) => all + link.gaps + sum(link.errors), 0);
    if (!this.#schedule.isDue(nowS, errors + sum(missed) + skipped)) return;
    this.#send(links).catch((error) => this.#host.failed(error));
  }

  async #send(links: Readonly<Record<string, LinkHealth>>): Promise<void> {
    const { store, ids, vitals, directory } = this.#host;
    const uplink = this.#host.uplink();
    const body = healthBody({
      t: this.#host.now(),
      links,
      store: await store.counters(),
      uplink: uplink.status(),
      measuring: this.#host.measuring(),
      snapshots: this.#host.snapshots(),
      eventLoopP99Ms: vitals.loopP99Ms(),
      directory,
      cpuPct: vitals.cpuPct(),
    });
    await store.commit({ outbox: [outboxMessage(ids, 'health', uplink.topics.health, body)] });
    uplink.kick();
  }
}

function sum(counts: Readonly<Record<string, number>>): number {
  return Object.values(counts).reduce((all, count) => all + count, 0);
}
