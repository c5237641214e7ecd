/** `forebay run`: the agent, until SIGTERM. */

import { loadStation } from '../config/load.ts';
import { Agent } from '../station/agent.ts';
import { systemClock } from '../station/clock.ts';
import { Log } from '../station/log.ts';
import { ServiceManager } from '../station/service-manager.ts';

export async function runCommand({ config, version }: { config: string; version: string }): Promise<number> {
  const station = loadStation(config);
  const log = new Log(systemClock.monotonicS);
  const manager = new ServiceManager(process.env, (error) =>
    log.warn('the service manager could not be told', { err: error }),
  );
  const agent = new Agent(station, {
    version,
    log,
    manager,
    fatal: (error) => {
      log.error('the agent ends, to be started anew', error);
      void agent.stop().finally(() => process.exit(1));
    },
  });
  const stopped = new Promise<void>((resolve) => {
    process.once('SIGTERM', resolve);
    process.once('SIGINT', resolve);
  });
  const starting = agent.start();
  // From the start on: the signal would end a process that has no use for it.
  process.on('SIGHUP', () =>
    starting.then(
      () => agent.reload(() => loadStation(config)),
      () => undefined,
    ),
  );
  try {
    await starting;
  } catch (error) {
    // Its threads would keep the process for ever.
    await agent.stop().catch((trouble: unknown) => log.error('what was started did not stop', trouble));
    endSoon();
    throw error;
  }
  if (agent.embeddedPort !== null) log.info('embedded broker on loopback', { port: agent.embeddedPort });
  await stopped;
  await agent.stop();
  endSoon();
  return 0;
}

/** With the status that the command leaves. What hangs (a disk, a device) must not keep a stopped agent from ending. */
function endSoon(): void {
  setTimeout(() => process.exit(), 100).unref();
}
