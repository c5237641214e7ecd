/** What the demo writes: a table that refreshes on a terminal, plain lines elsewhere. */

import type { DemoBoard } from './demo-board.ts';
import type { DemoEvidence } from './demo-evidence.ts';
import { soundMachine, worseningMachine } from './demo-station.ts';

export interface Traffic {
  readonly seconds: number;
  readonly ofSeconds: number;
  /** Bytes that the nodes put on the line. */
  readonly rawBytes: number;
}

type Screen = Pick<NodeJS.WritableStream, 'write'> & { isTTY?: boolean; columns?: number };

const nothing = '–';

/** 1 234 567 → `1.23 MB`. */
export function bytesText(bytes: number): string {
  if (bytes < 1000) return `${bytes} B`;
  return bytes < 1e6 ? `${(bytes / 1e3).toFixed(1)} kB` : `${(bytes / 1e6).toFixed(2)} MB`;
}

function figure(value: number | null | undefined, digits: number): string {
  return typeof value === 'number' ? value.toFixed(digits) : nothing;
}

/** One line a point, with the figures as published. */
export function tableLines(board: DemoBoard): string[] {
  const head = ['point', 'mm/s', 'zone', 'outer race line', 'modulation', 'part named', 'alarm'];
  const rows = [...board.points]
    .sort(([a], [b]) => a.localeCompare(b))
    .map(([key, { reading }]) => {
      const { bpfo = null, defect = null } = reading.envelope ?? {};
      const overFloor = bpfo?.over_floor_db;
      const alarms = board.alarmsOf(key.split('/')[0] ?? '');
      const standing = alarms.filter(([alarm, row]) => alarm.startsWith(`${key}.`) && row.state !== 'normal');
      return [
        key,
        figure(reading.velocity?.overall, 2),
        reading.zone ?? nothing,
        typeof overFloor === 'number' ? `${overFloor.toFixed(1)} dB` : nothing,
        figure(bpfo?.modulation, 2),
        defect ?? nothing,
        standing.map(([alarm, { level }]) => `${alarm.slice(key.length + 1)} ${level}`).join(', ') || nothing,
      ];
    });
  const widths = head.map((title, k) => Math.max(title.length, ...rows.map((row) => (row[k] ?? '').length)));
  return [head, ...rows].map((row) =>
    row
      .map((cell, k) => cell.padEnd(widths[k] ?? 0))
      .join('  ')
      .trimEnd(),
  );
}

export function trafficLine(board: DemoBoard, traffic: Traffic): string {
  const ratio = board.bytes > 0 ? `, 1 byte for ${Math.round(traffic.rawBytes / board.bytes)}` : '';
  return (
    `${Math.round(traffic.seconds)} s of ${Math.round(traffic.ofSeconds)}: ${bytesText(traffic.rawBytes)} in from ` +
    `the nodes, ${bytesText(board.bytes)} published in ${board.messages} messages${ratio}`
  );
}

export class DemoView {
  readonly #screen: Screen;
  #drawn = 0;

  constructor(screen: Screen) {
    this.#screen = screen;
  }

  get live(): boolean {
    return this.#screen.isTTY === true;
  }

  /** Lines that stay. */
  tell(lines: readonly string[]): void {
    this.#erase();
    for (const line of lines) this.#screen.write(`${line}\n`);
  }

  /** The present state: drawn over the last one on a terminal, below it elsewhere. */
  show(board: DemoBoard, traffic: Traffic): void {
    this.#erase();
    const lines = [
      '',
      ...(board.points.size > 0 ? tableLines(board) : ['no reading yet']),
      trafficLine(board, traffic),
    ];
    const width = this.live ? (this.#screen.columns ?? 80) : Number.POSITIVE_INFINITY;
    // A line that wraps would put the cursor count out.
    for (const line of lines) this.#screen.write(`${line.slice(0, width - 1)}\n`);
    this.#drawn = this.live ? lines.length : 0;
  }

  /** What is drawn stays, and what follows goes below it. */
  settle(): void {
    this.#drawn = 0;
  }

  #erase(): void {
    if (this.#drawn > 0) this.#screen.write(`\u001b[${this.#drawn}A\u001b[J`);
    this.#drawn = 0;
  }
}

/** A machine in a line: its figures at the end, and the alarms that it has. */
function machineLine(board: DemoBoard, machine: string): string {
  const readings = [...board.points]
    .filter(([key]) => key.startsWith(`${machine}/`))
    .map(([, row]) => row.reading);
  const most = (values: (number | null | undefined)[]) => {
    const numbers = values.filter((value) => typeof value === 'number');
    return numbers.length > 0 ? Math.max(...numbers) : null;
  };
  const velocity = figure(most(readings.map((reading) => reading.velocity?.overall)), 2);
  const zones = [
    ...new Set(readings.map(({ zone }) => zone).filter((zone) => typeof zone === 'string')),
  ].sort();
  const overFloor = figure(most(readings.map((reading) => reading.envelope?.bpfo?.over_floor_db)), 1);
  const alarms = board.alarmsOf(machine).length;
  return (
    `  ${machine}: at most ${velocity} mm/s, zone ${zones.at(-1) ?? nothing}; outer race line ${overFloor} dB over its ` +
    `floor; ${alarms === 0 ? 'no alarm' : `${alarms} alarm${alarms > 1 ? 's' : ''}`}`
  );
}

/** What was found, what it cost, where to go from here. */
export function summaryLines(
  board: DemoBoard,
  traffic: Traffic,
  lost: { frames: number; samples: number },
  evidence: DemoEvidence,
): string[] {
  const missing = [...board.missing(), ...(evidence.trouble === null ? [] : [evidence.trouble])];
  const raised = [...board.alarms].map(
    ([key, { state, level, reason, atS }]) =>
      `  ${key}, ${level}, now ${state} (changed at ${Math.round(atS)} s): ${reason ?? ''}`,
  );
  const findings = [...board.findings]
    .filter(([, text]) => text !== '')
    .map(([key, text]) => `  ${key}: ${text}`);
  return [
    '',
    'What was found',
    machineLine(board, soundMachine),
    machineLine(board, worseningMachine),
    ...(missing.length === 0
      ? ['  The velocity hardly moved: a bearing shows in the envelope long before.']
      : []),
    ...raised,
    ...(findings.length > 0 ? ['  likely faults:', ...findings.map((line) => `  ${line}`)] : []),
    ...(evidence.lines.length > 0 ? ['', 'The waveform behind the alarm', ...evidence.lines] : []),
    '',
    'What it cost',
    `  ${trafficLine(board, traffic)}`,
    '  (PUBLISH packets as a subscriber got them, without TCP/IP. Every reading was sent, for the table to move; by',
    '  default one is sent when a figure has moved, and every 2 h.)',
    lost.samples > 0
      ? `  ${lost.samples} samples a channel never reached the line (${lost.frames} frames had no room on it): this machine was busy.`
      : '  No frame was lost on the way in.',
    '',
    'Where to look next',
    '  README.md, then config/two-pumps.yaml: copy it and put your machines in',
    '  forebay check -c FILE    validates it and says what follows from it, bytes a day included',
    '  forebay run -c FILE      the agent itself; listen with any MQTT client on forebay/#',
    '',
    'Forebay advises. It is not a machine protection system: no trip may depend on it.',
    '',
    ...(missing.length === 0
      ? [
          'The demo showed what it promises: the sound pump without alarm, the outer race of the other one found and',
          'its waveform pulled.',
        ]
      : ['The demo did NOT show what it promises:', ...missing.map((line) => `  ${line}`)]),
  ];
}
