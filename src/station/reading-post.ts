/** Puts readings that are worth their bytes into the outbox, and what they measured into the trend. */

import { figureAt } from '../alarm/figure.ts';
import type { Station } from '../config/station.ts';
import type { Reading } from '../measure/reading.ts';
import type { Commit, OutboxMessage, TrendValue } from '../store/types.ts';
import { readingBody } from '../uplink/payload.ts';
import { type LastSent, lastSentOf, whySend } from '../uplink/publish-policy.ts';

export interface ReadingPostHost {
  commit(commit: Commit): Promise<void>;
  committed(): void;
  message(pointKey: string, body: Record<string, unknown>): OutboxMessage;
  monotonicS(): number;
  lost(error: unknown): void;
}

/** A trend value is kept this often; the alarm engine looks at days. */
const TREND_EVERY_S = 600;

export class ReadingPost {
  /** Readings that the database did not take. */
  lost = 0;
  readonly #settings: Station['publish'];
  readonly #watches: readonly string[];
  readonly #host: ReadingPostHost;
  readonly #lastSent = new Map<string, LastSent>();
  readonly #lastTrendS = new Map<string, number>();
  readonly #latest = new Map<string, { t: string; reading: Reading }>();

  /** @param watches figures that a trend is kept of, by path. */
  constructor(settings: Station['publish'], watches: readonly string[], host: ReadingPostHost) {
    this.#settings = settings;
    this.#watches = watches;
    this.#host = host;
  }

  /** The newest reading of every point, as it would be published. */
  latest(): Record<string, Record<string, unknown>> {
    return Object.fromEntries(
      [...this.#latest].map(([key, { t, reading }]) => [key, readingBody(t, reading)]),
    );
  }

  async take(pointKey: string, t: string, reading: Reading): Promise<void> {
    this.#latest.set(pointKey, { t, reading });
    const nowS = this.#host.monotonicS();
    const send = whySend(this.#lastSent.get(pointKey) ?? null, reading, nowS, this.#settings) !== null;
    const trend = this.#trendOf(pointKey, Date.parse(t), reading, nowS);
    if (!send && trend.length === 0) return;
    const outbox = send ? [this.#host.message(pointKey, readingBody(t, reading))] : [];
    try {
      await this.#host.commit({ outbox, trend });
    } catch (error) {
      this.lost++;
      this.#host.lost(error);
      return;
    }
    if (send) this.#lastSent.set(pointKey, lastSentOf(reading, nowS));
    this.#host.committed();
  }

  #trendOf(point: string, wallMs: number, reading: Reading, nowS: number): TrendValue[] {
    const last = this.#lastTrendS.get(point);
    if (reading.running !== true || (last !== undefined && nowS - last < TREND_EVERY_S)) return [];
    this.#lastTrendS.set(point, nowS);
    return this.#watches.flatMap((watch) => {
      const figure = figureAt(reading, watch);
      return figure.kind === 'number' ? [{ point, watch, wallMs, value: figure.value }] : [];
    });
  }
}
