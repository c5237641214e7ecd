/**
 * The agent's log: pino, synchronous, one JSON line an event on standard error (standard output belongs to what a
 * command prints). A warning that repeats is folded: once at first, then a count at most every ten minutes.
 */

import { type DestinationStream, destination, type Logger, pino } from 'pino';

const FOLD_S = 600;
/** Warnings told apart; beyond, the one folded longest is forgotten. */
const MAX_FOLDED = 200;

export class Log {
  readonly #logger: Logger;
  readonly #monotonicS: () => number;
  readonly #folded = new Map<string, { atS: number; more: number }>();

  constructor(monotonicS: () => number, stream: DestinationStream = destination({ dest: 2, sync: true })) {
    this.#logger = pino({ base: null, timestamp: pino.stdTimeFunctions.isoTime }, stream);
    this.#monotonicS = monotonicS;
  }

  info(message: string, fields: Record<string, unknown> = {}): void {
    this.#logger.info(fields, message);
  }

  /** @param fields what may differ from time to time; warnings of the same message are folded into one. */
  warn(message: string, fields: Record<string, unknown> = {}): void {
    const now = this.#monotonicS();
    const known = this.#folded.get(message);
    if (known && now - known.atS < FOLD_S) {
      known.more++;
      return;
    }
    this.#logger.warn(known && known.more > 0 ? { ...fields, repeated: known.more } : fields, message);
    this.#folded.delete(message);
    this.#folded.set(message, { atS: now, more: 0 });
    const oldest = this.#folded.keys().next();
    if (this.#folded.size > MAX_FOLDED && !oldest.done) this.#folded.delete(oldest.value);
  }

  error(message: string, error: unknown): void {
    this.#logger.error({ err: error }, message);
  }
}
