/** `forebay run`: the agent, until SIGTERM. */

import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import { notAvailableYet } from '../config/not-available.ts';
import { Agent } from '../station/agent.ts';
import { systemClock } from '../station/clock.ts';
import { Log } from '../station/log.ts';

export async function runCommand({ config, version }: { config: string; version: string }): Promise<number> {
  const station = loadStation(config);
  const missing = notAvailableYet(station);
  if (missing.length > 0) {
    const list = missing.map(({ place, what }) => `${config} ${place}: ${what}`).join('\n');
    throw new ForebayError('config.not-available-yet', list);
  }
  const log = new Log(systemClock.monotonicS);
  const agent = new Agent(station, { version, log });
  const stopped = new Promise<void>((resolve) => {
    process.once('SIGTERM', resolve);
    process.once('SIGINT', resolve);
  });
  await agent.start();
  if (agent.embeddedPort !== null) log.info('embedded broker on loopback', { port: agent.embeddedPort });
  await stopped;
  await agent.stop();
  return 0;
}
