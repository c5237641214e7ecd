// What is said to whoever sent an ask that its check refuses.
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { askTrouble } from '../../src/uplink/ask-trouble.ts';
import { type AskVerb, askSchemas } from '../../src/uplink/payload-schemas.ts';

function said(verb: AskVerb, ask: Record<string, unknown>): string | null {
  // As it comes from a broker.
  const body: unknown = JSON.parse(JSON.stringify({ id: 'ask-1', ...ask }));
  const checked = askSchemas[verb].safeParse(body);
  return checked.success ? null : askTrouble(checked.error.issues[0]!, body);
}

const [alarm, by] = ['pump-1/de.zone', 'Ada'];
const range = { point: 'pump-1/de', watch: 'velocity.overall', from: '2026-03-02T10:00:00Z' };
const to = '2026-03-02T11:00:00Z';

describe('what is wrong with an ask', () => {
  it.each<[AskVerb, Record<string, unknown>, string | null]>([
    ['acknowledge', { alarm, by }, null],
    ['acknowledge', { alarm }, 'by is missing'],
    ['acknowledge', { alarm, by: '' }, 'by is empty'],
    ['acknowledge', { alarm, by: null }, 'by must be text'],
    ['acknowledge', { alarm, by: 'x'.repeat(81) }, 'by may have 80 characters at most'],
    ['acknowledge', { alarm: 'p', by }, 'alarm must have 3 characters or more'],
    ['acknowledge', { alarm, by, raised: 'last one' }, 'raised is not an id of an alarm'],
    ['shelve', { alarm, by }, 'minutes is missing'],
    ['shelve', { alarm, by, minutes: 'long' }, 'minutes must be a number'],
    ['shelve', { alarm, by, minutes: 0 }, 'minutes must be a number above 0'],
    ['shelve', { alarm, by, minutes: 1e6 }, 'minutes may be 43200 at most'],
    ['test', { alarm, level: 'loud' }, 'level must be one of alert, danger'],
    ['test', { alarm }, 'level is missing'],
    ['out-of-service', { by, why: 'bearing' }, 'one of alarm, point, machine is needed'],
    ['snapshot', { point: 'a/b', machine: 'a' }, 'one of point, machine is needed'],
    ['fetch', { snapshot: 's', from_s: -1 }, 'from_s must be a number not below 0'],
    ['fetch', { snapshot: 's', parts: 'all' }, 'parts must be a list'],
    ['fetch', { snapshot: 's', parts: [0, 1.5] }, 'parts[1] must be a whole number'],
    ['fetch', { snapshot: 's', parts: Array(501).fill(0) }, 'parts may have 500 entries at most'],
    ['fetch', { snapshot: 's', cancel: '?' }, 'cancel is not an id of an ask'],
    ['journal', { since: 'yesterday' }, 'since is neither an id nor a time such as 2026-03-02T10:15:30Z'],
    ['trend', { ...range }, 'to is missing'],
    ['trend', { ...range, to: 'now' }, 'to is not a time such as 2026-03-02T10:15:30Z'],
    ['trend', { ...range, to, points: 0 }, 'points must be a number not below 1'],
    ['baseline', { machine: 'pump-1', action: 'go' }, 'action must be one of start, accept, reject, show'],
  ])('%s with %j: %s', (verb, ask, sentence) => {
    expect(said(verb, ask)).toBe(sentence);
  });

  it('is said without patterns and without the words of the checking library, whatever came', () => {
    const names = [
      'alarm',
      'by',
      'raised',
      'minutes',
      'why',
      'machine',
      'point',
      'level',
      'snapshot',
      'seconds',
    ];
    const more = [
      'parts',
      'channels',
      'cancel',
      'from_s',
      'since',
      'from',
      'to',
      'watch',
      'points',
      'action',
    ];
    const value = fc.oneof(fc.jsonValue({ maxDepth: 2 }), fc.string());
    let refused = 0;
    fc.assert(
      fc.property(
        fc.constantFrom(...(Object.keys(askSchemas) as AskVerb[])),
        fc.dictionary(fc.constantFrom(...names, ...more, 'hours', 'text'), value),
        (verb, ask) => {
          const sentence = said(verb, ask);
          if (sentence === null) return;
          refused++;
          expect(sentence).not.toMatch(/invalid|expected|received|undefined|has not the form|[\\^$|]/i);
          expect(sentence.length).toBeLessThan(100);
        },
      ),
      { seed: 5, numRuns: 2000 },
    );
    expect(refused).toBeGreaterThan(500);
  });
});
