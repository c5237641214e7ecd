// Injects every fault of test/support/faults.ts into the real agent and prints the table of the README's reliability
// section. Runs what `npm run build` made: npm run reliability -- [--seed 1] [--only TEXT] [--long]
// `--long` takes the faults too that need minutes each.
import { fileURLToPath } from 'node:url';
import { parseArgs } from 'node:util';
import { runnerImport } from 'vite';

const root = fileURLToPath(new URL('..', import.meta.url));
const { values } = parseArgs({
  options: {
    seed: { type: 'string', default: '1' },
    only: { type: 'string', default: '' },
    long: { type: 'boolean', default: false },
  },
});
const { module } = await runnerImport(`${root}test/support/fault-run.ts`);
const { module: list } = await runnerImport(`${root}test/support/faults.ts`);
const wanted = list.faults.filter(({ name, times, untested }) => {
  const why = untested?.() ?? null;
  if (why !== null) console.error(`NOT TESTED: ${name}: ${why}`);
  return why === null && name.includes(values.only) && (times > 0 || values.long);
});
let failed = 0;
console.log('| fault | times | alarms sent | alarms received | readings lost | time to recover |');
console.log('|---|---:|---:|---:|---:|---:|');
await module.runFaults(
  wanted,
  (_, row) => {
    if (row instanceof Error) {
      failed++;
      console.error(row.message);
      return;
    }
    if (row.alarmsReceived < row.alarmsSent || row.disordered > 0) failed++;
    const { fault, times, alarmsSent, alarmsReceived, readingsLost, recoverS } = row;
    console.log(
      `| ${fault} | ${times} | ${alarmsSent} | ${alarmsReceived} | ${readingsLost} | ${recoverS.toFixed(1)} s |`,
    );
  },
  { seed: Number(values.seed), times: ({ times }) => Math.max(1, times), recoverWithinS: 150 },
);
process.exit(failed > 0 ? 1 : 0);
