import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { RecordSchedule } from '../../src/station/schedule.ts';

describe('RecordSchedule', () => {
  it('starts records at multiples of the step on the node index, once each is complete', () => {
    const schedule = new RecordSchedule(100, 250, 130);
    expect(schedule.due(449, 130)).toEqual([]);
    expect(schedule.due(450, 130)).toEqual([{ first: 200, samples: 250 }]);
    expect(schedule.due(700, 130)).toEqual([
      { first: 300, samples: 250 },
      { first: 400, samples: 250 },
    ]);
  });

  it('counts and leaves out what was overwritten', () => {
    const schedule = new RecordSchedule(100, 100, 0);
    expect(schedule.due(550, 301)).toEqual([{ first: 400, samples: 100 }]);
    expect(schedule.skipped).toBe(4);
  });

  it('gives the same records however the samples arrive', () => {
    fc.assert(
      fc.property(
        fc.integer({ min: 1, max: 50 }),
        fc.integer({ min: 1, max: 120 }),
        fc.nat(300),
        fc.array(fc.nat(90), { maxLength: 30 }),
        (step, length, first, arrivals) => {
          const piecewise = new RecordSchedule(step, length, first);
          let head = first;
          const seen = arrivals.flatMap((n) => {
            head += n;
            return piecewise.due(head, first);
          });
          expect(seen).toEqual(new RecordSchedule(step, length, first).due(head, first));
        },
      ),
      { seed: 7, numRuns: 500 },
    );
  });

  it('refuses sizes that would never end', () => {
    expect(() => new RecordSchedule(0, 10, 0)).toThrow(RangeError);
  });
});
