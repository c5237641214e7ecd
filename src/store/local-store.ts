import type { Commit, OpenReport, Store, StoreEngine } from './types.ts';

/** A store in this thread, for a replay, a command that reads, and tests. */
export function localStore(engine: StoreEngine): Store {
  return {
    open: async (leastRunS): Promise<OpenReport> => engine.open(leastRunS),
    commit: async (commit: Commit) => engine.commit(commit),
    batch: async (query) => engine.batch(query),
    accept: async (ns) => engine.accept(ns),
    reject: async (n, reason, { poison }) => engine.reject(n, reason, poison),
    releaseRefused: async () => engine.releaseRefused(),
    releaseHungUp: async () => engine.releaseHungUp(),
    resendRetained: async () => engine.resendRetained(),
    retainedTopics: async () => engine.retainedTopics(),
    counters: async () => engine.counters(),
    alarmStates: async () => engine.alarmStates(),
    baselines: async () => engine.baselines(),
    journal: async (query) => engine.journal(query),
    trend: async (query) => engine.trend(query),
    recentTrend: async (query) => engine.recentTrend(query),
    budget: async (day) => engine.budget(day),
    close: async () => engine.close(),
  };
}
