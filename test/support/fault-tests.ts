/** The faults of one kind as tests: what must hold after each, whatever it was. */
import { afterAll, describe, expect, it } from 'vitest';
import { runFault } from './fault-run.ts';
import { FaultStation, pointKeys } from './fault-station.ts';
import { type Fault, faults } from './faults.ts';
import { haveMosquitto } from './mosquitto.ts';
import { seeded } from './seeded.ts';

/** Samples flow again within 10 s of the cause's end, a reading one record (here a second) later, and on its way. */
const recoverWithinS = 12;

export function testFaults(room: Fault['room'], seed: number): void {
  const random = seeded(seed);
  let usual: FaultStation | null = null;

  describe.runIf(haveMosquitto)(`no alarm is lost or overtaken, and samples flow again: ${room}`, () => {
    afterAll(() => usual?.stop());

    for (const fault of faults.filter((entry) => entry.room === room && entry.times > 0)) {
      const why = fault.untested?.() ?? null;
      if (why !== null) console.log(`NOT TESTED: ${fault.name}: ${why}`);
      it.runIf(why === null)(fault.name, { timeout: 180_000 }, async () => {
        const own = fault.start ? await FaultStation.start(fault.start()) : null;
        if (!own) usual ??= await FaultStation.start();
        const station = (own ?? usual)!;
        try {
          const row = await runFault(station, fault, fault.times, random, recoverWithinS);
          expect(row.alarmsReceived).toBe(row.alarmsSent);
          expect(row.disordered).toBe(0);
          expect(row.readingsLost).toBeLessThanOrEqual(fault.costs * fault.times * pointKeys.length);
        } catch (error) {
          console.log(station.agent.text.slice(-4000));
          throw error;
        } finally {
          await own?.stop();
        }
      });
    }
  });
}
