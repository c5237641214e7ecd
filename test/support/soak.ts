/**
 * A station left alone for hours: simulated nodes, a real broker, and a fault every so often. It is watched from
 * outside: memory and descriptors by the kernel, the delay of the event loop by its own `health`.
 */
import { readFileSync } from 'node:fs';
import { runFault } from './fault-run.ts';
import { FaultStation } from './fault-station.ts';
import { faults } from './faults.ts';
import { sleep } from './proxy.ts';
import { seeded } from './seeded.ts';

export interface SoakOptions {
  hours: number;
  seed: number;
  /** Seconds from one fault to the next. */
  faultEveryS: number;
  /** The agent is never killed, so that memory is that of one process. */
  oneProcess: boolean;
  say(line: string): void;
}

/** Faults that leave the process alive and need no station of their own, but the outage of a whole broker too. */
const bearable = (name: string) =>
  /^(link|broker killed|broker paused|broker refuses|serial|node (silent|restarts|clock)|two nodes|configuration)/.test(
    name,
  );

export interface SoakResult {
  hours: number;
  faults: Record<string, number>;
  failures: string[];
  alarms: { sent: number; received: number; lost: number; disordered: number };
  readingsReceived: number;
  readingsLost: number;
  longestRecoverS: number;
  /** Least squares over the second half, in MB an hour, with its standard error. */
  memory: { firstMb: number; lastMb: number; slopeMbPerH: number; errorMbPerH: number; samples: number };
  descriptors: { first: number; last: number };
  eventLoopP99Ms: number[];
}

export async function soak(options: SoakOptions): Promise<SoakResult> {
  const random = seeded(options.seed);
  const station = await FaultStation.start({ prepare: ({ agent }) => asTheUnitStarts(agent) });
  const list = faults.filter(
    ({ name, start }) =>
      bearable(name) && (start === undefined || Object.keys(start()).length === 0) && !/SIGKILL/.test(name),
  );
  const kill = faults.find(({ name }) => /SIGKILL/.test(name))!;
  const done: Record<string, number> = {};
  const failures: string[] = [];
  const memory: { h: number; mb: number }[] = [];
  const loop: number[] = [];
  let longestRecoverS = 0;
  const began = performance.now();
  const hours = () => (performance.now() - began) / 3.6e6;
  let firstDescriptors = 0;
  let heardHealth = '';
  const look = () => {
    if (!station.agent.running) return;
    memory.push({ h: hours(), mb: station.agent.memoryBytes() / 1e6 });
    const health = station.room.latest.get('health') as
      | { id: string; event_loop: { p99_ms: number } }
      | undefined;
    if (health && health.id !== heardHealth) {
      heardHealth = health.id;
      loop.push(health.event_loop.p99_ms);
    }
  };
  const watch = setInterval(look, 10_000);
  try {
    await sleep(20_000);
    firstDescriptors = station.agent.descriptors();
    while (hours() < options.hours) {
      await sleep(1000 * options.faultEveryS * (0.5 + random()));
      const fault = !options.oneProcess && random() < 0.1 ? kill : list[Math.floor(random() * list.length)]!;
      try {
        const row = await runFault(station, fault, 1, random, 150);
        longestRecoverS = Math.max(longestRecoverS, row.recoverS);
        done[fault.name] = (done[fault.name] ?? 0) + 1;
        options.say(
          `${(hours() * 60).toFixed(1)} min: ${fault.name}: back after ${row.recoverS.toFixed(1)} s, ` +
            `${row.alarmsReceived}/${row.alarmsSent} alarms, ${row.readingsLost} readings lost, ` +
            `${(station.agent.memoryBytes() / 1e6).toFixed(1)} MB, ${station.agent.descriptors()} descriptors`,
        );
      } catch (error) {
        failures.push(`${fault.name}: ${(error as Error).message}`);
        options.say(`FAILED ${failures.at(-1)}`);
        if (!station.agent.running) await station.agent.start();
      }
    }
    await sleep(10_000);
    const alarms = await station.alarms(60_000);
    const readings = [...station.room.readings.values()];
    return {
      hours: hours(),
      faults: done,
      failures,
      alarms,
      readingsReceived: readings.reduce((sum, { good }) => sum + good, 0),
      readingsLost: station.readingsLost(),
      longestRecoverS,
      memory: slopeOf(memory),
      descriptors: { first: firstDescriptors, last: station.agent.descriptors() },
      eventLoopP99Ms: loop,
    };
  } finally {
    clearInterval(watch);
    await station.stop();
  }
}

/** The options and the environment that the service of `scripts/` gives, for they decide on memory. */
function asTheUnitStarts(agent: FaultStation['agent']): void {
  const unit = readFileSync(new URL('../../scripts/forebay.service', import.meta.url), 'utf8');
  const options = /^ExecStart=\S+ (--.*?) \S+\/main\.js /m.exec(unit)?.[1]?.split(' ');
  const environment = [...unit.matchAll(/^Environment=(\w+)=(.*)$/gm)].map(([, name, value]) => [
    name,
    value,
  ]);
  if (options === undefined || environment.length === 0)
    throw new Error('the unit of the service reads otherwise');
  agent.nodeArgs = options;
  agent.env = { ...process.env, ...Object.fromEntries(environment) };
}

/** Least squares over the second half: what comes before is warming up. */
function slopeOf(all: readonly { h: number; mb: number }[]): SoakResult['memory'] {
  const half = all.slice(Math.floor(all.length / 2));
  const n = half.length;
  const meanH = half.reduce((sum, { h }) => sum + h, 0) / n;
  const meanMb = half.reduce((sum, { mb }) => sum + mb, 0) / n;
  const sxx = half.reduce((sum, { h }) => sum + (h - meanH) ** 2, 0);
  const slope = half.reduce((sum, { h, mb }) => sum + (h - meanH) * (mb - meanMb), 0) / sxx;
  const rest = half.reduce((sum, { h, mb }) => sum + (mb - meanMb - slope * (h - meanH)) ** 2, 0);
  return {
    firstMb: all[0]?.mb ?? Number.NaN,
    lastMb: all.at(-1)?.mb ?? Number.NaN,
    slopeMbPerH: slope,
    errorMbPerH: Math.sqrt(rest / Math.max(1, n - 2) / sxx),
    samples: n,
  };
}
