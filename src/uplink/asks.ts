/**
 * Takes asks from the broker: checks, limits, hands on, answers. An ask that is refused changes nothing. Whoever cannot
 * be answered, for want of a usable id, and whoever goes on too fast even to be refused, is only counted.
 */

import { askTrouble } from './ask-trouble.ts';
import { type Ask, type AskVerb, askSchemas } from './payload-schemas.ts';

export interface AskHost {
  /** Puts the answer into the outbox. */
  answer(askId: string, body: Readonly<Record<string, unknown>>): Promise<void>;
  log(level: 'warn' | 'error', message: string, details: Record<string, unknown>): void;
  /** Monotonic seconds. */
  monotonicS(): number;
}

/** Thrown by a handler: the ask is refused with this reason. */
export class AskRefused extends Error {
  constructor(reason: string) {
    super(reason);
    this.name = 'AskRefused';
  }
}

export type AskHandler<V extends AskVerb> = (
  ask: Ask<V>,
) => Record<string, unknown> | Promise<Record<string, unknown>>;

const idPattern = /^[A-Za-z0-9_-]{2,64}$/;
const maxBytes = 4096;
const idsRemembered = 1000;
const atOnce = 4;

/** `capacity` at once, and `perSecond` in the long run. */
class Bucket {
  readonly #capacity: number;
  readonly #perSecond: number;
  #tokens: number;
  #atS: number;

  constructor(capacity: number, perSecond: number, nowS: number) {
    this.#capacity = capacity;
    this.#perSecond = perSecond;
    this.#tokens = capacity;
    this.#atS = nowS;
  }

  take(nowS: number): boolean {
    this.#tokens = Math.min(this.#capacity, this.#tokens + (nowS - this.#atS) * this.#perSecond);
    this.#atS = nowS;
    if (this.#tokens < 1) return false;
    this.#tokens--;
    return true;
  }
}

export interface AskCounters {
  done: number;
  refused: number;
  /** Retained, repeated, without a usable id, or too fast to be refused. */
  ignored: number;
}

export const noAsks = (): AskCounters => ({ done: 0, refused: 0, ignored: 0 });

export class AskDispatcher {
  readonly #enabled: ReadonlySet<string>;
  readonly #host: AskHost;
  readonly #handlers = new Map<string, AskHandler<AskVerb>>();
  readonly #seen = new Set<string>();
  readonly #served: Bucket;
  readonly #refusals: Bucket;
  #underWay = 0;
  readonly counters: AskCounters;

  /** @param counters are counted on. */
  constructor(enabled: readonly string[], host: AskHost, counters: AskCounters) {
    this.#enabled = new Set(enabled);
    this.#host = host;
    this.counters = counters;
    const nowS = host.monotonicS();
    this.#served = new Bucket(10, 1, nowS);
    this.#refusals = new Bucket(60, 5, nowS);
  }

  handle<V extends AskVerb>(verb: V, handler: AskHandler<V>): void {
    this.#handlers.set(verb, handler as unknown as AskHandler<AskVerb>);
  }

  /** Never throws and never rejects: MQTT.js would stop delivering. */
  async take(verb: string, payload: Buffer, retained: boolean): Promise<void> {
    try {
      await this.#take(verb, payload, retained);
    } catch (error) {
      this.#host.log('error', 'an ask could not be answered', { verb: verb.slice(0, 40), err: error });
    }
  }

  async #take(verb: string, payload: Buffer, retained: boolean): Promise<void> {
    const body = payload.byteLength <= maxBytes ? parse(payload) : null;
    const id = body?.id ?? idWithin(payload);
    if (retained || typeof id !== 'string' || !idPattern.test(id) || this.#seen.has(id)) {
      this.counters.ignored++;
      return;
    }
    this.#remember(id);
    const reason = this.#objection(verb, payload, body);
    if (reason !== null) {
      await this.#refuse(id, reason);
      return;
    }
    const handler = this.#handlers.get(verb);
    if (handler === undefined) {
      await this.#refuse(id, `${verb} is not available yet`);
      return;
    }
    this.#underWay++;
    try {
      const result = await handler(body as Ask<AskVerb>);
      this.counters.done++;
      await this.#host.answer(id, { ask: id, ok: true, ...result });
    } catch (error) {
      if (!(error instanceof AskRefused)) this.#host.log('error', 'an ask failed', { verb, err: error });
      await this.#refuse(
        id,
        error instanceof AskRefused ? error.message : 'it failed inside the agent; see its log',
      );
    } finally {
      this.#underWay--;
    }
  }

  #objection(verb: string, payload: Buffer, body: Record<string, unknown> | null): string | null {
    if (!this.#served.take(this.#host.monotonicS())) return 'too many asks: wait a few seconds';
    if (payload.byteLength > maxBytes) return `an ask may have ${maxBytes} bytes, this one has more`;
    if (body === null) return 'the payload is not a JSON object';
    if (!Object.hasOwn(askSchemas, verb)) return 'there is no such ask';
    if (!this.#enabled.has(verb)) return `${verb} is not enabled at this station`;
    if (this.#underWay >= atOnce) return 'too many asks at the same time';
    const checked = askSchemas[verb as AskVerb].safeParse(body);
    if (checked.success) return null;
    return askTrouble(checked.error.issues[0]!, body);
  }

  async #refuse(id: string, error: string): Promise<void> {
    if (!this.#refusals.take(this.#host.monotonicS())) {
      this.counters.ignored++;
      return;
    }
    this.counters.refused++;
    await this.#host.answer(id, { ask: id, ok: false, error });
  }

  #remember(id: string): void {
    this.#seen.add(id);
    if (this.#seen.size <= idsRemembered) return;
    for (const oldest of this.#seen) {
      this.#seen.delete(oldest);
      break;
    }
  }
}

function parse(payload: Buffer): Record<string, unknown> | null {
  try {
    const value: unknown = JSON.parse(payload.toString('utf8'));
    return typeof value === 'object' && value !== null && !Array.isArray(value)
      ? (value as Record<string, unknown>)
      : null;
  } catch {
    return null;
  }
}

/** The id of a payload that is no JSON, or too much of it, so that its sender learns what is wrong. */
function idWithin(payload: Buffer): string | null {
  return (
    /"id"\s*:\s*"([A-Za-z0-9_-]{2,64})"/.exec(payload.subarray(0, maxBytes).toString('latin1'))?.[1] ?? null
  );
}
