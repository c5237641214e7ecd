// A station with simulated nodes, a real mosquitto and random faults, for hours. Runs what `npm run build` made.
//
//   npm run soak -- [--hours 1] [--seed 1] [--fault-every 20] [--kills N] [--one-process]
//
// Prints a line a fault and, at the end, a table. `--kills N` instead kills the agent N times at random moments under
// alarm load and does nothing else. `--one-process` never kills it, so that its memory can be compared with itself.
// Exit status 1 where an alarm was lost or overtaken, or a fault was not recovered from.
import { fileURLToPath } from 'node:url';
import { parseArgs } from 'node:util';
import { runnerImport } from 'vite';

const root = fileURLToPath(new URL('..', import.meta.url));
const { values } = parseArgs({
  options: {
    hours: { type: 'string', default: '1' },
    seed: { type: 'string', default: '1' },
    'fault-every': { type: 'string', default: '20' },
    kills: { type: 'string' },
    'one-process': { type: 'boolean', default: false },
  },
});
const table = (rows) => {
  console.log('\n| what | figure |\n|---|---|');
  for (const [what, figure] of rows) console.log(`| ${what} | ${figure} |`);
};

async function kills(count) {
  const { module } = await runnerImport(`${root}test/support/fault-run.ts`);
  const { module: list } = await runnerImport(`${root}test/support/faults.ts`);
  const fault = list.faults.find(({ name }) => name.includes('SIGKILL'));
  let result;
  await module.runFaults([fault], (_, row) => (result = row), {
    seed: Number(values.seed),
    times: () => count,
    recoverWithinS: 60,
  });
  if (result instanceof Error) {
    console.error(result.message);
    return 1;
  }
  table([
    ['agent killed (SIGKILL)', result.times],
    ['alarms sent', result.alarmsSent],
    ['alarms received', result.alarmsReceived],
    ['alarms out of order', result.disordered],
    ['readings lost (the agent was dead)', result.readingsLost],
    ['longest time to a reading of every point', `${result.recoverS.toFixed(1)} s`],
  ]);
  return result.alarmsReceived < result.alarmsSent || result.disordered > 0 ? 1 : 0;
}

async function hours() {
  const { module } = await runnerImport(`${root}test/support/soak.ts`);
  const result = await module.soak({
    hours: Number(values.hours),
    seed: Number(values.seed),
    faultEveryS: Number(values['fault-every']),
    oneProcess: values['one-process'],
    say: (line) => console.log(line),
  });
  const { memory, alarms, eventLoopP99Ms: loop } = result;
  const faults = Object.values(result.faults).reduce((sum, count) => sum + count, 0);
  table([
    ['time', `${result.hours.toFixed(2)} h`],
    ['faults', faults],
    ['faults not recovered from', result.failures.length],
    ['alarms sent', alarms.sent],
    ['alarms received', alarms.received],
    ['alarms lost', alarms.lost],
    ['alarms out of order', alarms.disordered],
    ['readings received', result.readingsReceived],
    ['readings lost', result.readingsLost],
    ['longest time to a reading of every point', `${result.longestRecoverS.toFixed(1)} s`],
    ['memory (RSS), first and last', `${memory.firstMb.toFixed(1)} MB, ${memory.lastMb.toFixed(1)} MB`],
    [
      'memory, slope of the second half',
      `${memory.slopeMbPerH.toFixed(2)} ± ${memory.errorMbPerH.toFixed(2)} MB/h (${memory.samples} samples)`,
    ],
    ['descriptors, first and last', `${result.descriptors.first}, ${result.descriptors.last}`],
    ['event-loop delay p99, each `health`', loop.length > 0 ? `${loop.join(', ')} ms` : 'none yet'],
  ]);
  console.log('\n| fault | times |\n|---|---|');
  for (const [name, count] of Object.entries(result.faults)) console.log(`| ${name} | ${count} |`);
  return alarms.lost + alarms.disordered + result.failures.length > 0 ? 1 : 0;
}

process.exit(await (values.kills === undefined ? hours() : kills(Number(values.kills))));
