/** Time, given from outside: the monotonic clock measures, the wall clock only labels. */

import { execFile } from 'node:child_process';

export interface StationClock {
  monotonicS(): number;
  wallMs(): number;
}

export const systemClock: StationClock = {
  monotonicS: () => Number(process.hrtime.bigint() / 1000n) / 1e6,
  wallMs: () => Date.now(),
};

/** Whether the gateway's clock is kept by the network; where nobody can tell, it is free. */
export function clockState(): Promise<'synchronised' | 'free'> {
  return new Promise((resolve) => {
    execFile(
      'timedatectl',
      ['show', '-p', 'NTPSynchronized', '--value'],
      { timeout: 3000 },
      (error, stdout) => {
        resolve(!error && stdout.trim() === 'yes' ? 'synchronised' : 'free');
      },
    );
  });
}
