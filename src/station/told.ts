/**
 * What other systems tell of a machine over MQTT: its speed, and whether it runs. A payload is a plain number or word,
 * or JSON: `1480`, `{"rpm": 1480}`, `{"hz": 24.67}` for a speed; `1`, `on`, `true`, `{"running": true}` for running.
 * What was told long ago is unknown again, and so is what cannot be read.
 *
 * Nobody knows when a retained payload was told, and the broker hands it out at each connection. So it is taken as told
 * now only where nothing was told on that topic yet: a pump is known at the start of the agent, and a teller that has
 * gone grows old whatever the link does.
 */

/** A teller that repeats itself each minute may miss four times. */
const FRESH_S = 300;
const MAX_PAYLOAD_BYTES = 256;

interface Told {
  atS: number;
  payload: string;
  /** It is among the unreadable already. */
  counted: boolean;
}

export class ToldValues {
  #topics: ReadonlySet<string> = new Set();
  readonly #monotonicS: () => number;
  readonly #told = new Map<string, Told>();
  /** Payloads that could not be read as what they should be. */
  unreadable = 0;

  /** @param topics the only ones listened to. */
  constructor(topics: Iterable<string>, monotonicS: () => number) {
    this.#monotonicS = monotonicS;
    this.listenTo(topics);
  }

  /** Other topics from now on; what was told on those that stay is kept. */
  listenTo(topics: Iterable<string>): void {
    this.#topics = new Set(topics);
    for (const topic of this.#told.keys()) if (!this.#topics.has(topic)) this.#told.delete(topic);
  }

  get topics(): readonly string[] {
    return [...this.#topics];
  }

  hear(topic: string, payload: string, retained: boolean): void {
    if (!this.#topics.has(topic) || (retained && this.#told.has(topic))) return;
    const tooLong = payload.length > MAX_PAYLOAD_BYTES;
    if (tooLong) this.unreadable++;
    this.#told.set(topic, {
      atS: this.#monotonicS(),
      payload: tooLong ? '' : payload.trim(),
      counted: tooLong,
    });
  }

  /** Speed in Hz; null: not told, told too long ago, or not readable. */
  shaftHz(topic: string): number | null {
    return this.#read(topic, speedOf);
  }

  running(topic: string): boolean | null {
    return this.#read(topic, runningOf);
  }

  #read<T>(topic: string, parse: (value: unknown) => T | null): T | null {
    const told = this.#told.get(topic);
    if (!told || this.#monotonicS() - told.atS > FRESH_S) return null;
    const value = parse(parsed(told.payload));
    if (value === null && !told.counted) {
      told.counted = true;
      this.unreadable++;
    }
    return value;
  }
}

function parsed(text: string): unknown {
  try {
    return JSON.parse(text);
  } catch {
    return text;
  }
}

function field(value: unknown, key: string): unknown {
  return typeof value === 'object' && value !== null ? (value as Record<string, unknown>)[key] : undefined;
}

function positive(value: unknown): number | null {
  return typeof value === 'number' && Number.isFinite(value) && value >= 0 ? value : null;
}

function speedOf(value: unknown): number | null {
  const hz = positive(field(value, 'hz'));
  if (hz !== null) return hz;
  const rpm = positive(value) ?? positive(field(value, 'rpm'));
  return rpm === null ? null : rpm / 60;
}

function runningOf(value: unknown): boolean | null {
  const said = field(value, 'running') ?? value;
  if (said === true || said === 1) return true;
  if (said === false || said === 0) return false;
  if (typeof said !== 'string') return null;
  const word = said.toLowerCase();
  if (['on', 'true', 'running', 'run'].includes(word)) return true;
  return ['off', 'false', 'stopped', 'stop'].includes(word) ? false : null;
}

/** The topics that a station listens to beside its asks. */
export function toldTopics(
  machines: readonly {
    shaft: { kind: string; topic?: string } | null;
    running: { kind: string; topic?: string };
  }[],
): string[] {
  return machines.flatMap(({ shaft, running }) =>
    [shaft?.topic, running.topic].filter((topic) => topic !== undefined),
  );
}
