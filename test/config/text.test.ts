import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { edited, errorsOf, goodText, linesOf, stationOf } from './station-text.ts';

describe('the text of a station file', () => {
  it('is refused above 64 kB before it is parsed', () => {
    const text = `${goodText}#${'x'.repeat(65_536)}`;
    expect(errorsOf(text)).toMatchObject([{ code: 'config.too-large', line: 1 }]);
  });

  it.each([
    ['flow lists', '['.repeat(60_000)],
    ['flow maps', '{a: '.repeat(15_000)],
    ['block lists on one line', '- '.repeat(30_000)],
    ['complex keys on one line', '? '.repeat(30_000)],
  ])('is refused where %s are nested so deeply that parsing would end the process', (_what, text) => {
    expect(errorsOf(text)).toMatchObject([{ code: 'config.too-large' }]);
  });

  it('places a syntax error', () => {
    expect(linesOf('site: {id: weir\nlinks: []\n')[0]).toMatch(/^station\.yaml:2:1 file: /);
  });

  it('is one document: a second one would go unwatched', () => {
    const text = `${goodText}---\nmachines: []\n`;
    const line = goodText.split('\n').length;
    expect(errorsOf(text)).toMatchObject([{ code: 'config.syntax', line: expect.any(Number) }]);
    expect(errorsOf(text)[0]!.line).toBeGreaterThanOrEqual(line);
    expect(errorsOf(`---\n${goodText}`)).toEqual([]);
  });

  it('refuses a key that stands twice, and lists the other mistakes as well', () => {
    const text = edited(
      '    vanes: 6\n',
      '    vanes: 6\n    vanes: 7\n',
      edited('mains_hz: 50', 'mains_hz: 51'),
    );
    expect(errorsOf(text)).toMatchObject([
      { code: 'config.wrong-value', path: 'site.mains_hz' },
      { code: 'config.duplicate-key', line: 29, column: 5 },
    ]);
  });

  it('reads aliases, and places a mistake where it is written', () => {
    const shared = edited(
      'range_g: 16, mount: stud}',
      'range_g: 16, mount: stud}\n      a: &s {range_g: 5}\n      tach: *s',
    );
    expect(stationOf(shared).links[0]!.sensors.tach).toEqual({ usableHz: null, rangeG: 5, mount: null });
    const wrong = shared.replace('range_g: 5', 'range_g: -5');
    expect(new Set(errorsOf(wrong).map(({ line, column }) => `${line}:${column}`))).toEqual(
      new Set(['16:23']),
    );
  });

  it('bounds what aliases can grow to', () => {
    const levels = ['a', 'b', 'c', 'd', 'e', 'f', 'g', 'h', 'i'];
    const bomb = levels.map((name, index) =>
      index === 0 ? `${name}: &${name} [lol]` : `${name}: &${name} [${`*${levels[index - 1]},`.repeat(9)}]`,
    );
    expect(errorsOf(bomb.join('\n'))).toMatchObject([{ code: 'config.syntax' }]);
  });

  it.each(['', 'null', '- 1', 'text', '42', '---\n...\n---\n'])('says what is wrong with %j', (text) => {
    expect(errorsOf(text).length).toBeGreaterThan(0);
  });

  it('does not take a key of every object for a known one', () => {
    expect(linesOf(`${goodText}constructor: 1\n__proto__: {polluted: 1}\n`).join('\n')).toMatch(
      /constructor/,
    );
    expect(({} as Record<string, unknown>).polluted).toBeUndefined();
  });

  it('never throws, whatever is cut, doubled or put in', () => {
    const lines = goodText.split('\n');
    const edit = fc.record({
      at: fc.nat(lines.length - 1),
      how: fc.constantFrom('drop', 'double', 'indent', 'junk', 'null'),
      junk: fc.oneof(
        fc.string({ maxLength: 12 }),
        fc.constantFrom('[', '{', '- ', ': ', '&a ', '*a', '!!js ', '\t'),
      ),
    });
    fc.assert(
      fc.property(fc.array(edit, { minLength: 1, maxLength: 4 }), (edits) => {
        const text = [...lines];
        for (const { at, how, junk } of edits) {
          if (how === 'drop') text[at] = '';
          else if (how === 'double') text[at] += `\n${text[at]}`;
          else if (how === 'indent') text[at] = `  ${text[at]}`;
          else if (how === 'junk') text[at] = `${text[at]!.slice(0, 9)}${junk}${text[at]!.slice(9)}`;
          else text[at] = text[at]!.replace(/: .*/, ':');
        }
        const issues = errorsOf(text.join('\n'));
        for (const { line, column, message } of issues) {
          expect(line).toBeGreaterThan(0);
          expect(column).toBeGreaterThan(0);
          expect(message).not.toBe('');
        }
      }),
      { seed: 20_260_302, numRuns: 300 },
    );
  });

  it('never throws, whatever stands in the place of a value', () => {
    const values = ['null', '[2, 1]', '{a: 1}', '[{}]'];
    for (const match of goodText.matchAll(/: ([^,{}[\]\n]+)/g)) {
      const at = match.index + 2;
      for (const value of values) {
        const text = goodText.slice(0, at) + value + goodText.slice(at + match[1]!.length);
        expect(() => errorsOf(text), text).not.toThrow();
      }
    }
  });
});
