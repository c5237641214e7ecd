import type { Clock } from '../../src/link/supervisor.ts';

/** Time that passes only when told to; promises settle in between. */
export class FakeClock implements Clock {
  ms = 1000;
  chance = 0.5;
  #timers: { at: number; call: () => void }[] = [];

  now = () => this.ms;
  random = () => this.chance;
  after = (ms: number, call: () => void) => {
    const timer = { at: this.ms + ms, call };
    this.#timers.push(timer);
    return () => {
      this.#timers = this.#timers.filter((other) => other !== timer);
    };
  };

  get pending(): number {
    return this.#timers.length;
  }

  /** When the next timer fires, from now. */
  get nextInMs(): number {
    return Math.min(...this.#timers.map(({ at }) => at)) - this.ms;
  }

  async pass(ms: number): Promise<void> {
    const until = this.ms + ms;
    await settled();
    for (;;) {
      const next = this.#timers.filter(({ at }) => at <= until).sort((a, b) => a.at - b.at)[0];
      if (!next) break;
      this.#timers = this.#timers.filter((other) => other !== next);
      this.ms = Math.max(this.ms, next.at);
      next.call();
      await settled();
    }
    this.ms = until;
  }
}

async function settled(): Promise<void> {
  for (let k = 0; k < 20; k++) await Promise.resolve();
}
