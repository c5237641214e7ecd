/** What the agent's own process costs: the delay of its event loop and the share of a processor. */

import { monitorEventLoopDelay } from 'node:perf_hooks';

export class Vitals {
  readonly #monotonicS: () => number;
  readonly #delay = monitorEventLoopDelay({ resolution: 10 });
  #cpu: { usage: NodeJS.CpuUsage; atS: number };

  constructor(monotonicS: () => number) {
    this.#monotonicS = monotonicS;
    this.#cpu = { usage: process.cpuUsage(), atS: monotonicS() };
  }

  start(): void {
    this.#delay.enable();
    this.#cpu = { usage: process.cpuUsage(), atS: this.#monotonicS() };
  }

  stop(): void {
    this.#delay.disable();
  }

  /** 99th percentile of the delay since the last call, in milliseconds. */
  loopP99Ms(): number {
    const p99 = this.#delay.percentile(99) / 1e6;
    this.#delay.reset();
    return Number(p99.toPrecision(3));
  }

  /** Since the last call, in percent of one processor; null: no time has passed. */
  cpuPct(): number | null {
    const { usage: before, atS } = this.#cpu;
    const { user, system } = process.cpuUsage(before);
    this.#cpu = { usage: process.cpuUsage(), atS: this.#monotonicS() };
    const elapsedS = this.#cpu.atS - atS;
    return elapsedS > 0 ? Number(((user + system) / (elapsedS * 1e4)).toPrecision(3)) : null;
  }
}
