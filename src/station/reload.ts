/** What a configuration that arrives while the agent runs may change, and what it cannot. */

import type { Station } from '../config/station.ts';
import type { UplinkSettings } from '../uplink/uplink.ts';
import { toldTopics } from './told.ts';

/** Why this station cannot take the place of the running one, in words; null: it can. */
export function needsRestart(running: Station, next: Station): string | null {
  if (next.site.id !== running.site.id)
    return `site.id was ${running.site.id} and is now ${next.site.id}: all topics would change`;
  const { directory, maxMb } = running.storage;
  if (next.storage.directory !== directory)
    return `storage.directory was ${directory} and is now ${next.storage.directory}`;
  if (next.storage.maxMb !== maxMb) return `storage.max_mb was ${maxMb} and is now ${next.storage.maxMb}`;
  return null;
}

export function uplinkSettings(station: Station): UplinkSettings {
  return {
    site: station.site.id,
    broker: station.broker,
    asks: station.asks,
    commandTopics: toldTopics(station.machines),
  };
}

/** Whether the connection to the broker can stay as it is. */
export function sameUplink(running: Station, next: Station): boolean {
  return JSON.stringify(uplinkSettings(running)) === JSON.stringify(uplinkSettings(next));
}
