/**
 * What must move for the agent to be of use: each link, the database, measuring. Each is a counter; one that stands
 * still for too long while it has something to do is stuck, and only a new process helps.
 */

/** Longer than anything here waits while it deals with a fault by itself. */
export const STUCK_AFTER_S = 40;

export class Progress {
  readonly #monotonicS: () => number;
  readonly #seen = new Map<string, { count: number; atS: number }>();

  constructor(monotonicS: () => number) {
    this.#monotonicS = monotonicS;
  }

  /** Looks at all of them, and names those that are stuck. To be called every second or so. */
  stuck(all: Readonly<Record<string, number | null>>): string[] {
    const nowS = this.#monotonicS();
    const stuck: string[] = [];
    for (const name of this.#seen.keys()) if (!(name in all)) this.#seen.delete(name);
    for (const [name, count] of Object.entries(all)) {
      const seen = this.#seen.get(name);
      if (count === null) this.#seen.delete(name);
      else if (seen === undefined || seen.count !== count) this.#seen.set(name, { count, atS: nowS });
      else if (nowS - seen.atS > STUCK_AFTER_S) stuck.push(name);
    }
    return stuck;
  }
}
