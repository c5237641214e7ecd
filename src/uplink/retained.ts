/**
 * Retained messages at the broker. Two things can go wrong with them: a machine, a point or a rule leaves the
 * configuration and its last word stays for ever; or the broker loses them, or falls back to what it saved last.
 *
 * The second is found by the agent's own retained topic, read at each connect before it is written. A broker that
 * lived through the end of the last connection has published that connection's will. So anything but `offline` with
 * an id of the last connection means that it may have forgotten more, and all retained messages go out again, with
 * their old ids. The first connection of a run knows of no last one and does the same.
 */

import type { Store } from '../store/types.ts';
import type { MessageIds } from './message-ids.ts';
import { emptyingMessage } from './payload.ts';

/** Numbers of the `agent` messages of one connection: the last is the will's, and so orders behind all others. */
export const agentBlock = 64;

export interface AgentBlock {
  /** The first number. */
  first: number;
  used: number;
}

export function brokerKept(marker: Buffer | null, storeId: string, last: AgentBlock | null): boolean {
  if (marker === null || last === null) return false;
  let said: { id?: unknown; state?: unknown };
  try {
    said = JSON.parse(marker.toString('utf8')) as typeof said;
  } catch {
    return false;
  }
  if (typeof said !== 'object' || said === null || said.state !== 'offline' || typeof said.id !== 'string') {
    return false;
  }
  const [store, digits] = said.id.split('-');
  const n = Number(digits);
  return store === storeId && n >= last.first && n < last.first + agentBlock;
}

/** Empties the topics that are no longer among those that this configuration can write; returns how many. */
export async function emptyForgotten(
  store: Pick<Store, 'retainedTopics' | 'commit'>,
  ids: MessageIds,
  belongs: (topic: string) => boolean,
): Promise<number> {
  const gone = (await store.retainedTopics()).filter(({ topic }) => !belongs(topic));
  if (gone.length === 0) return 0;
  await store.commit({ outbox: gone.map(({ topic, class: name }) => emptyingMessage(ids, name, topic)) });
  return gone.length;
}
