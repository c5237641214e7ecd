/** How a journal entry is kept: the alarm payload with the reading that caused it, or a person's note. */

import type { AlarmJournalEntry } from '../alarm/effects.ts';
import type { JournalEntry } from '../store/types.ts';
import type { MessageIds } from '../uplink/message-ids.ts';
import { readingBody } from '../uplink/payload.ts';

export function journalEntryOf({ id, t, key, payload, reading }: AlarmJournalEntry): JournalEntry {
  const body = reading === null ? null : readingBody(t, reading);
  return { n: numberOf(id), kind: 'alarm', key, t, json: JSON.stringify({ ...payload, reading: body }) };
}

/** What a person notes of a machine. */
export function noteEntry(
  ids: MessageIds,
  machine: string,
  note: { readonly by: string | null; readonly text: string },
  t: string,
): JournalEntry {
  const n = ids.take();
  return { n, kind: 'note', key: machine, t, json: JSON.stringify({ id: ids.idOf(n), ...note }) };
}

/** The number in a message id `<store>-<n>`. */
export function numberOf(id: string): number {
  return Number(id.slice(id.lastIndexOf('-') + 1));
}

/** The entry as it is printed and answered: the keys of its payload, with what says whose it is. */
export function journalLine({
  kind,
  key,
  t,
  json,
}: JournalEntry): { kind: string; machine: string } & Record<string, unknown> {
  const slash = key.indexOf('/');
  const machine = slash < 0 ? key : key.slice(0, slash);
  const body = JSON.parse(json) as Record<string, unknown>;
  return kind === 'alarm'
    ? { kind, machine, alarm: key.slice(slash + 1), ...body }
    : { kind, machine, t, ...body };
}
