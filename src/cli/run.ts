/** `forebay run`: the agent, until SIGTERM. */

import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import { notAvailableYet } from '../config/not-available.ts';
import type { Station } from '../config/station.ts';
import { Agent } from '../station/agent.ts';
import { systemClock } from '../station/clock.ts';
import { Log } from '../station/log.ts';
import { ServiceManager } from '../station/service-manager.ts';

export async function runCommand({ config, version }: { config: string; version: string }): Promise<number> {
  const station = readStation(config);
  const log = new Log(systemClock.monotonicS);
  const manager = new ServiceManager(process.env, (error) =>
    log.warn('the service manager could not be told', { err: error }),
  );
  const agent = new Agent(station, { version, log, manager });
  const stopped = new Promise<void>((resolve) => {
    process.once('SIGTERM', resolve);
    process.once('SIGINT', resolve);
  });
  await agent.start();
  process.on('SIGHUP', () => void agent.reload(() => readStation(config)));
  if (agent.embeddedPort !== null) log.info('embedded broker on loopback', { port: agent.embeddedPort });
  await stopped;
  await agent.stop();
  // What hangs (a disk, a device) must not keep a stopped agent from ending.
  setTimeout(() => process.exit(0), 100).unref();
  return 0;
}

/** @throws ForebayError, ConfigError where the file cannot be used. */
function readStation(config: string): Station {
  const station = loadStation(config);
  const missing = notAvailableYet(station);
  if (missing.length > 0) {
    const list = missing.map(({ place, what }) => `${config} ${place}: ${what}`).join('\n');
    throw new ForebayError('config.not-available-yet', list);
  }
  return station;
}
