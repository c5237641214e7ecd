// Loaded before the agent: ends its measuring worker at SIGUSR2, and its store worker at SIGWINCH.
import { syncBuiltinESMExports } from 'node:module';
import threads from 'node:worker_threads';

const workers = new Map();
threads.Worker = class extends threads.Worker {
  constructor(url, options) {
    super(url, options);
    workers.set(String(url).includes('measuring') ? 'SIGUSR2' : 'SIGWINCH', this);
  }
};
syncBuiltinESMExports();
for (const signal of ['SIGUSR2', 'SIGWINCH']) process.on(signal, () => void workers.get(signal)?.terminate());
