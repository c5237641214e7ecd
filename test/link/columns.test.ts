import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { ColumnStream } from '../../src/link/column-stream.ts';
import { ColumnParser, parseCounts } from '../../src/link/columns.ts';

const text = (value: string) => new TextEncoder().encode(value);
const counts = (value: string, decimals = 0) => parseCounts(text(value), 0, text(value).length, decimals);

/** Rows and breaks of columns 0 and 1, after a first line that is always left out. */
function parse(input: string, pieces?: number) {
  const events: (number[] | 'break')[] = [];
  const places = [
    { column: 0, decimals: 0 },
    { column: 1, decimals: 2 },
  ];
  const parser = new ColumnParser(places, {
    onRow: (row) => events.push([...row]),
    onBreak: () => events.push('break'),
  });
  const bytes = text(`tail of a line\n${input}`);
  const size = pieces ?? bytes.length;
  for (let at = 0; at < bytes.length; at += size) parser.push(bytes.subarray(at, at + size));
  return { events, errors: parser.errors };
}

describe('a number of the column format', () => {
  it('becomes a count exactly, halves away from zero', () => {
    const cases: [string, number, number][] = [
      ['0', 0, 0],
      ['-0', 0, 0],
      ['42', 0, 42],
      ['+42', 0, 42],
      ['-16000', 0, -16000],
      ['1.005', 3, 1005],
      ['1.005', 2, 101],
      ['-1.005', 2, -101],
      ['0.1', 7, 1_000_000],
      ['.5', 1, 5],
      ['5.', 1, 50],
      ['2147483647', 0, 2147483647],
      ['-2147483647', 0, -2147483647],
      ['0.00000000000000000001', 3, 0],
      ['0.33333333333333333333', 3, 333],
      ['1e3', 0, 1000],
      ['1.5E-2', 3, 15],
      ['-2.5e+01', 0, -25],
    ];
    for (const [value, decimals, expected] of cases)
      expect([value, counts(value, decimals)]).toEqual([value, expected]);
  });

  it('is refused where it is none, or does not fit', () => {
    for (const value of [
      '',
      '-',
      '+',
      '.',
      'a',
      '1a',
      '1.2.3',
      '--1',
      '0x10',
      'NaN',
      'inf',
      '1e',
      '1e+',
      '1e1.5',
      '1 ',
    ]) {
      expect([value, counts(value)]).toEqual([value, Number.NaN]);
    }
    expect(counts('2147483648')).toBeNaN();
    expect(counts('9999999999999999999999')).toBeNaN();
    expect(counts('1e999')).toBeNaN();
    expect(counts('300', 7)).toBeNaN();
  });

  it('is that which the sender printed', () => {
    fc.assert(
      fc.property(fc.integer({ min: -(2 ** 31) + 1, max: 2 ** 31 - 1 }), fc.nat(6), (value, decimals) => {
        const digits = String(Math.abs(value)).padStart(decimals + 1, '0');
        const whole = digits.slice(0, digits.length - decimals);
        const printed = `${value < 0 ? '-' : ''}${whole}.${digits.slice(digits.length - decimals)}`;
        expect(counts(printed, decimals)).toBe(value === 0 ? 0 : value);
      }),
      { seed: 6 },
    );
  });
});

describe('the column parser', () => {
  it('takes all separators, line ends and comments', () => {
    const lines =
      '1,2\n3;4\r\n5\t6\n  7   8  \n# a comment\n\n\r\n9 , 10\n-11;\t12.34\n  # another\n13,1e1\n';
    const rows = [
      [1, 200],
      [3, 400],
      [5, 600],
      [7, 800],
      [9, 1000],
    ];
    const { events } = parse(lines);
    expect(events.slice(0, 5)).toEqual(rows);
    // `;` and a tab are two separators: that line has an empty column between them.
    expect(events.slice(5)).toEqual(['break', [13, 1000]]);
  });

  it('gives the same a byte at a time and in any pieces', () => {
    const input = '1,2\r\n3,4\nx,5\n# c\n6,7\n8\n9,10\n';
    const whole = parse(input);
    for (let size = 1; size < input.length; size++) expect(parse(input, size)).toEqual(whole);
    expect(whole.events).toEqual([[1, 200], [3, 400], 'break', [6, 700], 'break', [9, 1000]]);
    expect(whole.errors).toEqual({ 'line-too-long': 0, 'malformed-line': 1, 'column-count': 1 });
  });

  it('leaves out the first line, which may be the tail of one', () => {
    const rows: number[][] = [];
    const parser = new ColumnParser([{ column: 0, decimals: 0 }], {
      onRow: (row) => rows.push([...row]),
      onBreak: () => rows.push([Number.NaN]),
    });
    parser.push(text('5\n15\n25\n3'));
    parser.reset();
    parser.push(text('5\n45\n'));
    expect(rows).toEqual([[15], [25], [45]]);
  });

  it('drops a line of endless length as one, and takes the next', () => {
    for (const size of [1, 7, 100_000]) {
      const { events, errors } = parse(`1,2\n${'9'.repeat(5000)}\n3,4\n`, size);
      expect(events).toEqual([[1, 200], 'break', [3, 400]]);
      expect(errors['line-too-long']).toBe(1);
    }
  });

  it('takes two lines run together for no sample', () => {
    const { events, errors } = parse('1,2\n3,45,6\n7,8\n');
    expect(events).toEqual([[1, 200], 'break', [7, 800]]);
    expect(errors['column-count']).toBe(1);
  });

  it('gets used to another number of columns when it stays', () => {
    const { events } = parse(`1,2,3\n${'1,2\n'.repeat(9)}`);
    expect(events).toEqual([[1, 200], ...Array.from({ length: 7 }, () => 'break'), [1, 200], [1, 200]]);
  });

  it('does not mind what stands in columns that nobody asked for', () => {
    expect(parse('1,2,hello,there\n3,4,,\n').events).toEqual([
      [1, 200],
      [3, 400],
    ]);
  });

  it('throws at nothing', () => {
    fc.assert(
      fc.property(fc.array(fc.uint8Array({ maxLength: 40 }), { maxLength: 30 }), (pieces) => {
        let rows = 0;
        const parser = new ColumnParser([{ column: 2, decimals: 3 }], {
          onRow: (row) => {
            rows++;
            expect(Number.isInteger(row[0])).toBe(true);
          },
          onBreak: () => undefined,
        });
        for (const piece of pieces) parser.push(piece);
        const dropped = Object.values(parser.errors).reduce((sum, count) => sum + count, 0);
        const lines = pieces.reduce((sum, piece) => sum + piece.filter((byte) => byte === 10).length, 0);
        expect(rows + dropped).toBeLessThanOrEqual(lines);
      }),
      { seed: 9 },
    );
  });
});

describe('the column stream', () => {
  function stream() {
    const events: unknown[] = [];
    const columns = new ColumnStream([{ column: 0, decimals: 0 }], {
      onEpoch: (first, because) => events.push(['epoch', first, because]),
      onGap: (n) => events.push(['gap', n]),
      onSamples: (planar, _stride, n) => events.push([...planar.subarray(0, n)]),
    });
    return { events, columns };
  }

  it('delivers what a piece held, and a gap of one for a malformed line', () => {
    const { events, columns } = stream();
    columns.push(text('0\n1\n2\nx\n3\n'));
    columns.push(text('4\n5'));
    columns.push(text('6\n'));
    expect(events).toEqual([['epoch', 0, 'first'], [1, 2], ['gap', 1], [3], [4], [56]]);
    expect(columns.rowsTaken).toBe(5);
  });

  it('begins an epoch after the line was cut', () => {
    const { events, columns } = stream();
    columns.push(text('0\n1\n'));
    columns.reopened();
    columns.push(text('x\ny\n2\n'));
    expect(events).toEqual([['epoch', 0, 'first'], [1], ['epoch', 0, 'reconnected'], [2]]);
  });

  it('delivers long pieces in bounded blocks, losing nothing', () => {
    const { events, columns } = stream();
    columns.push(text(`skipped\n${Array.from({ length: 2000 }, (_, i) => i).join('\n')}\n`));
    expect(events.slice(1).flat()).toEqual(Array.from({ length: 2000 }, (_, i) => i));
    expect(Math.max(...events.slice(1).map((block) => (block as number[]).length))).toBe(512);
  });
});
