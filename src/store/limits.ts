import type { OutboxMessage, StoreLimits } from './types.ts';

/** What a row costs beside its topic and payload: keys, indexes and page slack, generously. */
const rowOverheadBytes = 64;

/** Bytes that a message counts in the bounds of the outbox. */
export function rowBytes(message: Pick<OutboxMessage, 'topic' | 'payload'>): number {
  return Buffer.byteLength(message.topic) + message.payload.byteLength + rowOverheadBytes;
}

/**
 * Shares out the space that the database may take. A trend row takes some 100 bytes with its index; the rest of
 * `maxMb` belongs to waveforms and to the database's own slack.
 */
export function storeLimits(maxMb: number): StoreLimits {
  const bytes = maxMb * 1e6;
  return {
    outboxRows: 50_000,
    outboxBytes: Math.floor(bytes * 0.1),
    answerAgeS: 600,
    setAsideRows: 200,
    journalRows: 100_000,
    journalBytes: Math.floor(bytes * 0.1),
    journalAgeS: 5 * 365 * 86_400,
    trendRows: Math.floor((bytes * 0.2) / 100),
  };
}
