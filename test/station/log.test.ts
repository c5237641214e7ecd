import { describe, expect, it } from 'vitest';
import { Log } from '../../src/station/log.ts';

function logInto(lines: Record<string, unknown>[], clock: { s: number }): Log {
  return new Log(() => clock.s, { write: (line: string) => void lines.push(JSON.parse(line)) });
}

describe('Log', () => {
  it('folds a warning that repeats and says how often', () => {
    const lines: Record<string, unknown>[] = [];
    const clock = { s: 0 };
    const log = logInto(lines, clock);
    for (let i = 0; i < 50; i++) log.warn('no broker', { try: i });
    clock.s = 601;
    log.warn('no broker');
    log.warn('another matter');
    expect(lines.map(({ msg, repeated }) => [msg, repeated])).toEqual([
      ['no broker', undefined],
      ['no broker', 49],
      ['another matter', undefined],
    ]);
  });

  it('keeps no more than a bounded number of warnings apart', () => {
    const lines: Record<string, unknown>[] = [];
    const log = logInto(lines, { s: 0 });
    for (let i = 0; i < 201; i++) log.warn(`matter ${i}`);
    log.warn('matter 0');
    log.warn('matter 200');
    expect(lines).toHaveLength(202);
  });
});
