/** Runs a fault and takes the figures that the reliability table shows. */
import { FaultStation } from './fault-station.ts';
import type { Fault } from './faults.ts';
import { sleep } from './proxy.ts';
import { seeded } from './seeded.ts';

export interface FaultRow {
  fault: string;
  times: number;
  alarmsSent: number;
  alarmsReceived: number;
  disordered: number;
  readingsLost: number;
  /** Longest time from the end of the cause to a good reading of every point, of samples sent since. */
  recoverS: number;
}

/** @param recoverWithinS gives up, and throws, after so long. */
export async function runFault(
  station: FaultStation,
  fault: Fault,
  times: number,
  random: () => number,
  recoverWithinS: number,
): Promise<FaultRow> {
  const before = await station.alarms();
  const lostBefore = station.readingsLost();
  let recoverS = 0;
  const stopLoad = station.load();
  try {
    for (let time = 0; time < times; time++) {
      await fault.inject(station, random);
      recoverS = Math.max(recoverS, await station.flows(undefined, recoverWithinS * 1000));
    }
    // What was asked meanwhile, and what is asked now, has to come through as well.
    await sleep(2000);
  } finally {
    stopLoad();
  }
  await sleep(300);
  const after = await station.alarms(30_000);
  return {
    fault: fault.name,
    times,
    alarmsSent: after.sent - before.sent,
    alarmsReceived: after.received - before.received,
    disordered: after.disordered - before.disordered,
    readingsLost: station.readingsLost() - lostBefore,
    recoverS,
  };
}

/** Runs faults one after the other, on one station as long as they need none of their own. */
export async function runFaults(
  faults: readonly Fault[],
  done: (fault: Fault, row: FaultRow | Error) => void,
  options: { seed: number; times?: (fault: Fault) => number; recoverWithinS?: number },
): Promise<void> {
  const random = seeded(options.seed);
  let usual: FaultStation | null = null;
  try {
    for (const fault of faults) {
      let own: FaultStation | null = null;
      try {
        if (fault.start) own = await FaultStation.start(fault.start());
        else usual ??= await FaultStation.start();
        const times = options.times?.(fault) ?? fault.times;
        done(fault, await runFault((own ?? usual)!, fault, times, random, options.recoverWithinS ?? 12));
      } catch (error) {
        const station = own ?? usual;
        const log = station ? station.agent.text.slice(-3000) : '';
        done(fault, new Error(`${fault.name}: ${(error as Error).message}\n${log}`, { cause: error }));
        if (!own) {
          await usual?.stop();
          usual = null;
        }
      } finally {
        await own?.stop();
      }
    }
  } finally {
    await usual?.stop();
  }
}
