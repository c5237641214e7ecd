import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { commentsOf, tagsOf } from '../../src/snapshot/tags.ts';
import { someTags } from '../support/tagged.ts';

const map = (lines: readonly string[]) =>
  new Map(lines.map((line) => [line.slice(0, line.indexOf('=')), line.slice(line.indexOf('=') + 1)]));

describe('the tags of a snapshot', () => {
  it('come back as they were', () => {
    expect(tagsOf(map(commentsOf(someTags)), 3)).toEqual(someTags);
  });

  it('keep any scale and rate to the last bit', () => {
    const positive = fc.double({ min: 1e-12, max: 1e9, noNaN: true });
    fc.assert(
      fc.property(positive, positive, (hz, unitsPerCount) => {
        const [channel] = someTags.channels;
        const tags = {
          ...someTags,
          rate: { ...someTags.rate, hz },
          channels: [{ ...channel!, unitsPerCount }],
        };
        expect(tagsOf(map(commentsOf(tags)), 1)).toEqual(tags);
      }),
    );
  });

  it('are Vorbis comments: a name of printable ASCII, an equals sign, one line (xiph.org, Vorbis I, section 5)', () => {
    const lines = commentsOf({ ...someTags, cause: 'two\nlines = one' });
    for (const line of lines) expect(line).toMatch(/^[\x20-\x3c\x3e-\x7d]+=[^\n]*$/);
    expect(lines).toContain('CAUSE=two lines = one');
  });

  it('are none where the file is of another maker', () => {
    expect(tagsOf(new Map([['ARTIST', 'somebody']]), 2)).toBeNull();
  });

  it.each([
    ['RATE_HZ', undefined, /RATE_HZ is missing/],
    ['RATE_HZ', '-1', /RATE_HZ=-1 is not possible/],
    ['START', 'yesterday', /START=yesterday is no time/],
    ['START_CLOCK', 'sundial', /none of synchronised, free/],
    ['FIRST_INDEX', '1.5', /FIRST_INDEX=1.5 is not possible/],
    ['UNIT_2', 'inch', /UNIT_2=inch is none of/],
    ['UNITS_PER_COUNT_1', '0', /UNITS_PER_COUNT_1=0 is not possible/],
    ['COUNT_RANGE_1', 'wide', /no range/],
    ['GAPS', '7', /no stretch/],
    ['SHAFTS', 'pump-1:fast:x', /no speed/],
  ] as const)('are refused where %s is %s', (name, value, message) => {
    const comments = map(commentsOf(someTags));
    if (value === undefined) comments.delete(name);
    else comments.set(name, value);
    expect(() => tagsOf(comments, 3)).toThrow(message);
  });
});
