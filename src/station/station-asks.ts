/** What the station answers to asks. Each handler does one thing or refuses; sizes are bounded here. */

import type { AskInput } from '../alarm/effects.ts';
import { rounded } from '../signal/rounded.ts';
import type { JournalEntry, Store, TrendPoint } from '../store/types.ts';
import { AskRefused } from '../uplink/asks.ts';
import type { MessageIds } from '../uplink/message-ids.ts';
import type { Uplink } from '../uplink/uplink.ts';
import { journalLine, noteEntry, numberOf } from './journal-entry.ts';
import type { Judging } from './judging.ts';
import type { Learning } from './learning.ts';
import type { LiveJudge } from './live-judge.ts';
import type { ReadingPost } from './reading-post.ts';

export interface AskSources {
  judge: Pick<LiveJudge, 'take'>;
  post: Pick<ReadingPost, 'latest'>;
  store: Pick<Store, 'journal' | 'trend' | 'commit'>;
  ids: MessageIds;
  judging: Pick<Judging, 'plan' | 'state'>;
  learning: Pick<Learning, 'start' | 'accept' | 'reject' | 'show'>;
  now(): string;
}

/** An answer crosses a thin link; more is asked for piece by piece. */
const MAX_ANSWER_BYTES = 48_000;
const MAX_JOURNAL = 200;
const USUAL_TREND_POINTS = 100;

export function answerAsks(uplink: Pick<Uplink, 'handle'>, sources: AskSources): void {
  const operate = async (input: AskInput): Promise<Record<string, unknown>> => {
    const effects = await sources.judge.take(input);
    const answer = effects.find((effect) => effect.kind === 'answer');
    if (!answer) throw new AskRefused('the alarms cannot be written at present; try again');
    if (!answer.ok) throw new AskRefused(answer.error);
    return {};
  };
  const t = () => sources.now();
  const plan = () => sources.judging.plan;

  uplink.handle('readings', () => ({ readings: fitting(sources.post.latest(), 'see the retained topic') }));
  uplink.handle('acknowledge', ({ alarm, raised, by }) =>
    operate({ kind: 'acknowledge', alarm, by, t: t(), ...(raised === undefined ? {} : { raised }) }),
  );
  uplink.handle('shelve', ({ alarm, by, minutes }) =>
    operate({ kind: 'shelve', alarm, by, minutes, t: t() }),
  );
  uplink.handle('unshelve', ({ alarm, by }) => operate({ kind: 'unshelve', alarm, by, t: t() }));
  uplink.handle('reset', ({ alarm, by }) => operate({ kind: 'reset', alarm, by, t: t() }));
  uplink.handle('test', ({ alarm, level }) => operate({ kind: 'test', alarm, level, t: t() }));
  for (const kind of ['out-of-service', 'in-service'] as const) {
    uplink.handle(kind, ({ alarm, point, machine, by, why }) =>
      operate({ kind, target: alarm ?? point ?? machine ?? '', by, why, t: t() }),
    );
  }
  uplink.handle('note', async ({ machine, by, text }) => {
    if (!plan().machines.has(machine)) throw new AskRefused(`there is no machine ${machine}`);
    const entry = noteEntry(sources.ids, machine, { by, text }, t());
    await sources.store.commit({ journal: [entry] });
    return { noted: sources.ids.idOf(entry.n), ...newBaselineOffer(plan().station.asks, machine) };
  });
  uplink.handle('baseline', async ({ machine, action, hours, by = null, point }) => {
    const { learning, judging } = sources;
    const state = await {
      start: () => learning.start(machine, hours, by, judging.state),
      accept: () => learning.accept(machine, by),
      reject: () => learning.reject(machine, by),
      show: () => learning.show(machine),
    }[action]();
    const shown = Object.entries(state.points).filter(
      ([id]) => point === undefined || point === `${machine}/${id}`,
    );
    return { ...state, points: fitting(Object.fromEntries(shown), 'ask with its `point`') };
  });
  uplink.handle('journal', async ({ since }) =>
    journalAnswer(await journalSince(sources, since), since === undefined),
  );
  uplink.handle('trend', async ({ point, watch, from, to, points }) => {
    if (!plan().points.has(point)) throw new AskRefused(`there is no point ${point}`);
    const [fromMs, toMs] = [Date.parse(from), Date.parse(to)];
    if (!(fromMs < toMs)) throw new AskRefused('`from` must be before `to`');
    const trend = await sources.store.trend({
      point,
      watch,
      fromMs,
      toMs,
      points: points ?? USUAL_TREND_POINTS,
    });
    return { point, watch, trend: trend.map(trendLine) };
  });
}

/** What was changed is noted; what was learned of the machine before may no longer hold. */
function newBaselineOffer(asks: readonly string[], machine: string): Record<string, unknown> {
  if (!asks.includes('baseline')) return {};
  return {
    new_baseline: {
      ask: 'baseline',
      with: { machine, action: 'start' },
      when: 'if a part was changed: values learned before it may no longer hold',
    },
  };
}

function trendLine({ wallMs, mean, min, max, count }: TrendPoint): Record<string, unknown> {
  return {
    t: new Date(wallMs).toISOString(),
    mean: rounded(mean),
    min: rounded(min),
    max: rounded(max),
    count,
  };
}

/** Entries after an id or from a time on, to be read on from there; without either, the newest. */
function journalSince({ store, ids }: AskSources, since: string | undefined): Promise<JournalEntry[]> {
  const limit = MAX_JOURNAL;
  if (since === undefined) return store.journal({ limit });
  if (since.startsWith(`${ids.storeId}-`))
    return store.journal({ afterN: numberOf(since), limit, keep: 'oldest' });
  const ms = Date.parse(since);
  if (Number.isNaN(ms)) throw new AskRefused('`since` is neither a time nor an id of this station');
  return store.journal({ sinceT: new Date(ms).toISOString(), limit, keep: 'oldest' });
}

/**
 * As many entries as fit, oldest first. `more`: others were left out; with `since` later ones, to be asked for since the
 * last id here, without it older ones.
 */
function journalAnswer(entries: readonly JournalEntry[], newest: boolean): Record<string, unknown> {
  const lines: Record<string, unknown>[] = [];
  let bytes = 0;
  for (const entry of newest ? entries.toReversed() : entries) {
    const line = journalLine(entry);
    bytes += JSON.stringify(line).length;
    if (bytes > MAX_ANSWER_BYTES) break;
    lines.push(line);
  }
  const more = lines.length < entries.length || entries.length === MAX_JOURNAL;
  return { journal: newest ? lines.reverse() : lines, more };
}

/** Points as they fit; those that do not are named, with where they can be had. */
function fitting(
  points: Readonly<Record<string, object | string>>,
  elsewhere: string,
): Record<string, unknown> {
  const out: Record<string, unknown> = {};
  let bytes = 0;
  for (const [key, reading] of Object.entries(points)) {
    bytes += JSON.stringify(reading).length;
    out[key] = bytes > MAX_ANSWER_BYTES ? `too large for one answer: ${elsewhere}` : reading;
  }
  return out;
}
