// Writes alarms as fast as the store takes them and prints the number of each one that was acknowledged.
import { writeSync } from 'node:fs';
import { WorkerStore } from '../../dist/store/worker-store.js';

const [directory, limits] = process.argv.slice(2);
const store = new WorkerStore({ directory, maxMb: 64, limits: JSON.parse(limits) });
let { nextN: n } = await store.open();
for (;;) {
  await Promise.all(
    Array.from({ length: 3 }, async () => {
      const mine = n++;
      await store.commit({
        alarmStates: [{ key: 'last', json: String(mine) }],
        journal: [{ n: mine, kind: 'alarm', key: 'k', t: '2026', json: '{}' }],
        outbox: [
          { n: mine, class: 'alarm', topic: `t/${mine}`, payload: Buffer.from('x'), qos: 1, retain: true },
        ],
      });
      writeSync(1, `${mine}\n`);
    }),
  );
}
