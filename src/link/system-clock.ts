import type { Clock } from './supervisor.ts';

/** The clock, the timers and the chance of this machine. */
export const systemClock: Clock = {
  now: () => performance.now(),
  after: (ms, call) => {
    const timer = setTimeout(call, ms);
    return () => clearTimeout(timer);
  },
  random: () => Math.random(),
};
