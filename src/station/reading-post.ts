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
/** A zone or defect that flaps may send so many readings of a point within a minute ahead of the least interval. */
const MOST_EARLY = 6;
const EARLY_WINDOW_S = 60;

export class ReadingPost {
  /** Readings that the database did not take. */
  lost = 0;
  /** Changes of zone or defect that had to wait because the point flaps. */
  held = 0;
  #settings: Station['publish'];
  #watches: readonly string[];
  readonly #host: ReadingPostHost;
  readonly #lastSent = new Map<string, LastSent>();
  readonly #lastTrendS = new Map<string, number>();
  readonly #latest = new Map<string, { t: string; reading: Reading }>();
  /** When readings were sent ahead of the least interval, by point. */
  readonly #earlyS = new Map<string, readonly number[]>();
  readonly #waiting = new Set<string>();

  /** @param watches figures that a trend is kept of, by path. */
  constructor(settings: Station['publish'], watches: readonly string[], host: ReadingPostHost) {
    this.#settings = settings;
    this.#watches = watches;
    this.#host = host;
  }

  /** Goes on with other settings; `isPoint` says which points there still are. */
  replan(
    settings: Station['publish'],
    watches: readonly string[],
    isPoint: (pointKey: string) => boolean,
  ): void {
    this.#settings = settings;
    this.#watches = watches;
    for (const kept of [this.#lastSent, this.#lastTrendS, this.#latest, this.#earlyS, this.#waiting]) {
      for (const key of kept.keys()) if (!isPoint(key)) kept.delete(key);
    }
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
    const send = this.#isWorthIt(pointKey, reading, nowS);
    const trend = this.#trendOf(pointKey, Date.parse(t), reading, nowS);
    await this.#put(pointKey, send ? { t, reading } : null, trend, nowS);
  }

  /** Sends what had to wait, as it stands by now: no reading may come that would bring it along. */
  tick(): void {
    for (const pointKey of this.#waiting) {
      const nowS = this.#host.monotonicS();
      const latest = this.#latest.get(pointKey);
      if (latest && this.#isWorthIt(pointKey, latest.reading, nowS, true))
        void this.#put(pointKey, latest, [], nowS);
    }
  }

  #isWorthIt(pointKey: string, reading: Reading, nowS: number, again = false): boolean {
    const last = this.#lastSent.get(pointKey) ?? null;
    const why = whySend(last, reading, nowS, this.#settings);
    const early =
      last !== null && (why === 'zone' || why === 'defect') && nowS - last.atS < this.#settings.minIntervalS;
    const recent = (this.#earlyS.get(pointKey) ?? []).filter((atS) => nowS - atS < EARLY_WINDOW_S);
    const full = early && recent.length >= MOST_EARLY;
    if (full) {
      if (!again) this.held++;
      this.#waiting.add(pointKey);
    } else this.#waiting.delete(pointKey);
    if (early && !full) this.#earlyS.set(pointKey, [...recent, nowS]);
    return why !== null && !full;
  }

  async #put(
    pointKey: string,
    sent: { t: string; reading: Reading } | null,
    trend: readonly TrendValue[],
    nowS: number,
  ): Promise<void> {
    if (sent === null && trend.length === 0) return;
    const outbox = sent ? [this.#host.message(pointKey, readingBody(sent.t, sent.reading))] : [];
    try {
      await this.#host.commit({ outbox, trend });
    } catch (error) {
      this.lost++;
      this.#host.lost(error);
      return;
    }
    if (sent) this.#lastSent.set(pointKey, lastSentOf(sent.reading, nowS));
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
