/** `forebay journal`: the alarm journal kept on the gateway. */

import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import { journalLine } from '../station/journal-entry.ts';
import { readJournal } from '../store/read-journal.ts';
import { lineFor } from './event-text.ts';

export async function journalCommand(options: {
  config: string;
  since: string | null;
  json: boolean;
  out: { write(text: string): unknown };
}): Promise<number> {
  const station = loadStation(options.config);
  for (const entry of readJournal(station.storage.directory, sinceLabel(options.since))) {
    const line = journalLine(entry);
    options.out.write(`${options.json ? JSON.stringify(line) : lineFor(line)}\n`);
  }
  return 0;
}

/** Labels are compared as text, so the time is brought into the form that they have. */
function sinceLabel(since: string | null): string | null {
  if (since === null) return null;
  const ms = Date.parse(since);
  if (Number.isNaN(ms)) {
    throw new ForebayError(
      'command.usage',
      `--since ${since}: an ISO 8601 time is wanted, as 2026-03-02T10:15:30Z`,
    );
  }
  return new Date(ms).toISOString();
}
