import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import { demoCommand } from '../../src/cli/demo.ts';
import { DemoBoard } from '../../src/cli/demo-board.ts';
import { demoNodes, demoStationText } from '../../src/cli/demo-station.ts';
import { bytesText, DemoView, summaryLines, tableLines, trafficLine } from '../../src/cli/demo-view.ts';
import { parseStation } from '../../src/config/load.ts';
import { planPoint } from '../../src/measure/plan.ts';

const transports = [
  { kind: 'serial', path: '/dev/pts/90', baud: 3_000_000 },
  { kind: 'tcp', host: '127.0.0.1', port: 4001 },
] as const;

function station() {
  const text = demoStationText({ brokerPort: 18_830, storageDirectory: '/tmp/a: "b', transports });
  const result = parseStation(text, { file: 'demo.yaml', baseDir: '/tmp' });
  if ('errors' in result) throw new Error(result.errors.map((issue) => JSON.stringify(issue)).join('\n'));
  return result.station;
}

const topic = (rest: string) => `forebay/lock-seven/${rest}`;

function reading(over: Record<string, unknown> = {}): string {
  return JSON.stringify({
    quality: 'good',
    velocity: { unit: 'mm/s', overall: 1.234 },
    envelope: { defect: null, bpfo: { over_floor_db: 2.04, modulation: 0.031 } },
    zone: 'A',
    ...over,
  });
}

const outer = reading({ envelope: { defect: 'outer', bpfo: { over_floor_db: 17.2, modulation: 1.5 } } });
const alarm = (state: string) =>
  JSON.stringify({ state, level: 'alert', reason: 'outer in 3 of 5', check: 'look' });

/** A board that heard all that the demo promises. */
function promised(): DemoBoard {
  const board = new DemoBoard('lock-seven');
  for (const machine of ['pump-1', 'pump-2']) {
    for (const point of ['h', 'v', 'a']) {
      for (let k = 0; k < 2; k++)
        board.accept(topic(`${machine}/motor-de-${point}/reading`), reading(), 300, 10);
    }
  }
  board.accept(topic('pump-2/motor-de-h/reading'), outer, 300, 40);
  board.accept(topic('pump-2/alarm/motor-de-h.bearing'), alarm('unacknowledged'), 300, 44);
  return board;
}

const pulled = { lines: ['  x: 2.10 MB of FLAC pulled'], trouble: null };

describe("the demo's station", () => {
  it('is a valid station file whose plans hold no warning', () => {
    const { machines, rules, links } = station();
    expect(rules.map(({ id }) => id)).toEqual(['zone', 'bearing', 'sensor']);
    expect(links.map(({ transport }) => transport)).toEqual(transports);
    for (const [k, { source }] of demoNodes(75).entries()) {
      const machine = machines[k]!;
      expect(machine.points.length).toBe(3);
      for (const point of machine.points) {
        const plan = planPoint(point, machine, source().nominalRateHz, 50);
        expect(plan.warnings).toEqual([]);
        // Three readings that agree, after the first one, must fit well within the demo.
        expect(plan.recordSamples / plan.rateHz).toBeLessThan(10);
      }
    }
  });

  it('expects the very nodes that are simulated', () => {
    for (const [k, { link, settings, source }] of demoNodes(75).entries()) {
      const { nominalRateHz, channels } = source();
      expect(station().links[k]).toMatchObject({
        id: link,
        format: {
          kind: 'frames',
          expect: {
            node: settings.node,
            serialNumber: settings.serialNumber,
            sampleRateHz: nominalRateHz,
            channels: channels.map(({ name }) => name),
          },
        },
      });
    }
  });
});

describe("the demo's board", () => {
  it('passes over asks, answers and the parts of a waveform', () => {
    const board = new DemoBoard('lock-seven');
    expect(board.accept('forebay/lock-seven/answer/abc/0', 'fLaC\0 not JSON', 9000, 1)).toEqual([]);
    expect(board.messages).toBe(0);
  });

  it('misses nothing when the sound pump is quiet and the outer race of the other is found and alarmed', () => {
    expect(promised().missing()).toEqual([]);
  });

  it('misses what was not seen: the alarm, the outer race, the velocities', () => {
    const empty = new DemoBoard('lock-seven').missing();
    expect(empty.join('\n')).toMatch(
      /3 of the 3 points of pump-1.*\n.*3 points of pump-2.*\n.*no alarm.*\n.*outer race/,
    );
    const unmeasured = new DemoBoard('lock-seven');
    for (let k = 0; k < 9; k++) {
      unmeasured.accept(topic('pump-1/motor-de-h/reading'), reading({ velocity: { overall: null } }), 1, 1);
    }
    expect(unmeasured.missing()[0]).toMatch(/^3 of the 3/);
    const board = new DemoBoard('lock-seven');
    board.accept(topic('pump-2/motor-de-h/reading'), outer.replace('outer', 'inner'), 1, 1);
    expect(board.missing().some((line) => line.includes('named the outer race'))).toBe(true);
  });

  it('does not keep its word when the sound pump is accused or alarmed', () => {
    const accused = promised();
    accused.accept(topic('pump-1/motor-de-v/reading'), outer, 300, 50);
    expect(accused.missing()).toEqual(['pump-1 is sound, yet a reading of pump-1/motor-de-v accused: outer']);
    const alarmed = promised();
    alarmed.accept(topic('pump-1/alarm/motor-de-v.zone'), alarm('unacknowledged'), 300, 50);
    // Having gone again does not make it unsaid.
    alarmed.accept(topic('pump-1/alarm/motor-de-v.zone'), alarm('normal'), 300, 55);
    expect(alarmed.missing().length).toBe(1);
  });

  it('remembers why an alarm was raised when it is over', () => {
    const board = promised();
    const over = JSON.stringify({
      state: 'returned-unacknowledged',
      level: 'alert',
      reason: 'the condition is over',
    });
    board.accept(topic('pump-2/alarm/motor-de-h.bearing'), over, 1, 60);
    expect(board.alarmsOf('pump-2')).toEqual([
      [
        'pump-2/motor-de-h.bearing',
        { state: 'returned-unacknowledged', level: 'alert', reason: 'outer in 3 of 5', atS: 60 },
      ],
    ]);
  });

  it('tells alarms and findings once, when they change', () => {
    const board = promised();
    const key = 'pump-2/alarm/motor-de-h.bearing';
    expect(board.accept(topic(key), alarm('unacknowledged'), 1, 46)).toEqual([]);
    expect(board.accept(topic(key), alarm('acknowledged'), 1, 47)[0]).toMatch(
      /pump-2\/motor-de-h.bearing alert, ack/,
    );
    expect(board.accept(topic('pump-2/alarm/motor-de-v.zone'), alarm('normal'), 1, 48)).toEqual([]);
    expect(board.accept(topic(key), alarm('normal'), 1, 48)).toEqual([
      'alarm pump-2/motor-de-h.bearing is back to normal',
    ]);
    expect(tableLines(board).join('\n')).not.toContain('bearing alert');
    const finding = JSON.stringify({
      findings: [{ fault: 'bearing', likelihood: 'likely', points: ['motor-de-h'] }],
    });
    expect(board.accept(topic('pump-2/finding'), finding, 1, 49)).toEqual([
      'finding of pump-2: bearing (likely) at motor-de-h',
    ]);
    expect(board.accept(topic('pump-2/finding'), finding, 1, 50)).toEqual([]);
    expect(board.accept(topic('pump-2/finding'), '', 1, 51)).toEqual([]);
  });
});

describe("the demo's view", () => {
  const traffic = { seconds: 41.4, ofSeconds: 75, rawBytes: 19_700_000 };

  it('shows a point a line with velocity, zone, envelope level, part and alarm', () => {
    const lines = tableLines(promised());
    expect(lines.length).toBe(7);
    expect(lines[0]).toMatch(/point +mm\/s +zone +outer race line +modulation +part named +alarm/);
    expect(lines.find((line) => line.startsWith('pump-1/motor-de-h'))).toMatch(
      / 1\.23 +A +2\.0 dB +0\.03 +– +–$/,
    );
    expect(lines.find((line) => line.startsWith('pump-2/motor-de-h'))).toMatch(
      /17\.2 dB +1\.50 +outer +bearing alert$/,
    );
  });

  it('sets raw bytes in against bytes published', () => {
    const board = promised();
    expect(board.bytes).toBe(14 * 300);
    expect(trafficLine(board, traffic)).toBe(
      '41 s of 75: 19.70 MB in from the nodes, 4.2 kB published in 14 messages, 1 byte for 4690',
    );
    expect([bytesText(999), bytesText(1500), bytesText(2.5e6)]).toEqual(['999 B', '1.5 kB', '2.50 MB']);
  });

  it('redraws in place on a terminal, and writes no control sequence elsewhere', () => {
    const written = { live: '', plain: '' };
    for (const kind of ['live', 'plain'] as const) {
      const view = new DemoView({
        isTTY: kind === 'live',
        columns: 60,
        write: (text: string | Uint8Array) => {
          written[kind] += text;
          return true;
        },
      });
      view.show(promised(), traffic);
      view.tell(['an event']);
      view.show(promised(), traffic);
      view.settle();
      view.tell(['the end']);
    }
    expect(written.plain).not.toContain('\u001b');
    // The table's eight lines and one blank are taken back before the event is written.
    expect(written.live).toContain('\u001b[9A\u001b[Jan event\n');
    // What was settled stays: the end is written below it.
    expect(written.live.endsWith('\nthe end\n')).toBe(true);
    expect(Math.max(...written.live.split('\n').map((line) => line.length))).toBeLessThanOrEqual(60 + 8);
  });

  it('closes with what was found, what it cost, where to look next and the caution', () => {
    const text = summaryLines(promised(), traffic, { frames: 0, samples: 0 }, pulled).join('\n');
    expect(text).toMatch(/pump-2\/motor-de-h\.bearing, alert, now unacknowledged/);
    expect(text).toMatch(
      /pump-1: at most 1\.23 mm\/s, zone A; outer race line 2\.0 dB over its floor; no alarm/,
    );
    expect(text).toMatch(/pump-2: .*line 17\.2 dB over its floor; 1 alarm/);
    expect(text).toMatch(/4\.2 kB published/);
    expect(text).toMatch(/no trip may depend on it/);
    expect(text).toMatch(/The demo showed what it promises/);
    const failed = summaryLines(
      new DemoBoard('lock-seven'),
      traffic,
      { frames: 3, samples: 900 },
      { lines: [], trouble: 'no alarm came with a waveform' },
    ).join('\n');
    expect(failed).toMatch(/did NOT show.*\n.*points of pump-1/);
    expect(failed).toMatch(/900 samples a channel never reached the line \(3 frames/);
  });

  it('points at files and commands that exist', () => {
    const text = summaryLines(promised(), traffic, { frames: 0, samples: 0 }, pulled).join('\n');
    for (const file of ['README.md', 'config/two-pumps.yaml']) {
      expect(text).toContain(file);
      expect(readFileSync(new URL(`../../${file}`, import.meta.url), 'utf8').length).toBeGreaterThan(100);
    }
  });
});

describe('the demo', () => {
  it('refuses a time in which the pump cannot fail', async () => {
    await expect(demoCommand({ seconds: 5, out: process.stdout, version: '0' })).rejects.toThrow(
      /50 to 3600/,
    );
  });
});
