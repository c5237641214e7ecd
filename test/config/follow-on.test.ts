import { expect, it } from 'vitest';
import { edited, linesOf } from './station-text.ts';

/** One mistake is one line: what follows from it is not reported beside it. */
const single: readonly [from: string, to: string, line: RegExp][] = [
  [
    'id: motor-a, link: node-1',
    'id: motor-a, lnik: node-1',
    /points\.1\.lnik: is not a known key, did you mean link\?/,
  ],
  ['  username: weir', '  usrname: weir', /broker\.usrname: .*did you mean username\?/],
  ['shaft: {rpm: 1480}', 'shaft: {rpm: fast}', /shaft\.rpm: is "fast"/],
  ['table: iso-10816-7', 'table: iso', /severity\.table: is "iso"/],
  ['rated_kw: 45', 'rated_kw: much', /severity\.rated_kw: is "much"/],
  ['{alert: 12, danger: 20}', '{alert: high}', /above\.alert: is "high"/],
  ['orders: [4.5, 5.5]', 'orders: [5.5, 4.5]', /bands\.0\.orders: is \[5\.5,4\.5\]/],
  ['elements: 9', 'elements: nine', /bearings\.0\.elements: is "nine"/],
  ['  - id: pump-1\n', '  - id: Pump 1\n', /machines\.0\.id: is "Pump 1"/],
  ['{id: motor-h, link', '{id: Motor, link', /points\.0\.id: is "Motor"/],
  ['{id: de, elements', '{id: DE, elements', /bearings\.0\.id: is "DE"/],
  ['  - id: node-1\n', '  - id: node 1\n', /links\.0\.id: is "node 1"/],
  [
    'shaft: {tachometer: {link: node-2, channel: pulse}}',
    'shaft: {tachometer: none}',
    /shaft\.tachometer: is "none"/,
  ],
  ['    channels:\n', '    channelz:\n', /links\.1\.channelz: .*did you mean channels\?/],
  ['vanes: 6', 'vains: many', /machines\.0\.vains: .*did you mean vanes\?/],
];

it.each(single)('%j as %j is one mistake', (from, to, line) => {
  const lines = linesOf(edited(from, to));
  expect(lines).toHaveLength(1);
  expect(lines[0]).toMatch(line);
});

it('goes on below a misspelt key', () => {
  const lines = linesOf(
    edited('severity: {table: iso-10816-7, category: I', 'severty: {table: iso-10816-7, category: V'),
  );
  expect(lines).toHaveLength(2);
  expect(lines[0]).toMatch(/^station\.yaml:25:5 machines\.0\.severty: /);
  expect(lines[1]).toMatch(
    /^station\.yaml:25:45 machines\.0\.severity\.category: is "V", expected: .*I or II/,
  );
});
