/** `forebay learn`: has the running agent learn the baseline of each point, and puts what it learned in force. */

import { ForebayError } from '../config/errors.ts';
import { loadStation } from '../config/load.ts';
import type { Station } from '../config/station.ts';
import type { BaselineAnswer, BaselineLine } from '../station/baseline-answer.ts';
import { AskClient } from '../uplink/ask-client.ts';
import { AskRefused } from '../uplink/asks.ts';

export interface LearnOptions {
  readonly config: string;
  readonly hours: number | null;
  /** Put what was learned in force; otherwise it stays a proposal. */
  readonly accept: boolean;
  readonly out: { write(text: string): unknown };
  readonly err: { write(text: string): unknown };
}

const BY = 'forebay learn';
/** How often the agent is asked how far it is, within the rate that it answers. */
const POLL_S = { least: 2, most: 60 } as const;

/** 0 where at least one point was learned. */
export async function learnCommand(options: LearnOptions): Promise<number> {
  const station = loadStation(options.config);
  if (!station.asks.includes('baseline')) {
    throw new ForebayError(
      'command.usage',
      `${options.config}: the agent of this station does not answer the ask baseline; add it to asks`,
    );
  }
  const client = await AskClient.connect(station, (message) => options.err.write(`learn: ${message}\n`));
  try {
    return await learn(client, station, options);
  } finally {
    await client.close();
  }
}

type Ask = (machine: string, action: string, more?: Record<string, unknown>) => Promise<BaselineAnswer>;

async function learn(
  client: AskClient,
  station: Station,
  { hours, accept, out }: LearnOptions,
): Promise<number> {
  const ask: Ask = async (machine, action, more = {}) =>
    (await client.ask('baseline', { machine, action, by: BY, ...more })) as unknown as BaselineAnswer;
  const under: string[] = [];
  for (const { id } of station.machines) {
    const run = await begin(ask, id, hours, (line) => out.write(`${line}\n`));
    if (run) under.push(id);
  }
  let learned = 0;
  while (under.length > 0) {
    const machine = under[0]!;
    const state = await ask(machine, 'show');
    if (state.learning !== null) {
      const leftS = 3600 * state.learning.hours_left;
      await pause(Math.min(POLL_S.most, Math.max(POLL_S.least, leftS / 10)));
      continue;
    }
    under.shift();
    learned += await conclude(ask, machine, state, accept, (line) => out.write(`${line}\n`));
  }
  return learned > 0 ? 0 : 1;
}

/** Starts, or joins what is under way; false: refused. */
async function begin(
  ask: Ask,
  machine: string,
  hours: number | null,
  say: (line: string) => void,
): Promise<boolean> {
  const before = await ask(machine, 'show');
  if (before.learning !== null) {
    say(`${machine}: learning is under way since ${before.learning.since}, ${left(before)} h more`);
    return true;
  }
  try {
    const state = await ask(machine, 'start', hours === null ? {} : { hours });
    say(`${machine}: learning for ${state.learning?.hours} h of the running agent`);
    return true;
  } catch (error) {
    if (!(error instanceof AskRefused)) throw error;
    say(`${machine}: refused: ${error.message}`);
    return false;
  }
}

async function conclude(
  ask: Ask,
  machine: string,
  state: BaselineAnswer,
  accept: boolean,
  say: (line: string) => void,
): Promise<number> {
  const points = Object.entries(state.points);
  const proposed = points.filter(([, point]) => typeof point === 'object' && point.proposed !== null);
  if (accept && proposed.length > 0) await ask(machine, 'accept');
  for (const [id, point] of points) {
    const key = `${machine}/${id}`;
    if (typeof point === 'string') say(`${key}: ${point}`);
    else if (point.proposed === null) say(`${key}: refused: ${point.refused ?? 'nothing was learned'}`);
    else {
      const { ranges, notes } = point.proposed;
      const word = accept ? 'learned' : 'proposed';
      for (const range of ranges) say(`${key}: ${word}${rangeText(range)}`);
      for (const note of notes) say(`${key}: left out: ${note}`);
    }
  }
  return proposed.length;
}

function rangeText({ hz, figures }: BaselineLine['ranges'][number]): string {
  const where = hz === null ? '' : ` at ${hz[0]} to ${hz[1]} Hz`;
  const list = Object.entries(figures).map(([watch, { median, mad }]) => `${watch} ${median} ± ${mad}`);
  const readings = Math.max(...Object.values(figures).map((figure) => figure.readings));
  return `${where} from ${readings} readings: ${list.join(', ')}`;
}

function left(state: BaselineAnswer): string {
  return String(state.learning?.hours_left ?? 0);
}

function pause(seconds: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, 1000 * seconds));
}
