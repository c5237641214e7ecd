// Answers that are larger than an answer may be. What an ask does is tested over a broker, in asks.test.ts.
import { expect, it } from 'vitest';
import { answerAsks } from '../../src/station/station-asks.ts';
import { localStore } from '../../src/store/local-store.ts';
import { MemoryStore } from '../../src/store/memory-store.ts';
import type { AskHandler } from '../../src/uplink/asks.ts';
import { MessageIds } from '../../src/uplink/message-ids.ts';
import type { AskVerb } from '../../src/uplink/payload-schemas.ts';
import { Bench, onePoint } from '../alarm/support.ts';
import { roomyLimits } from '../support/store.ts';

interface Page {
  journal: { id: string; text: string }[];
  more: boolean;
}

it('gives a long journal in pages that leave nothing out', async () => {
  const store = localStore(new MemoryStore(roomyLimits, () => 0));
  const { storeId } = await store.open();
  const handlers = new Map<string, AskHandler<AskVerb>>();
  const bench = new Bench({ ...onePoint(), asks: ['baseline'] });
  answerAsks(
    { handle: (verb, handler) => void handlers.set(verb, handler as unknown as AskHandler<AskVerb>) },
    {
      judge: { take: async () => [] },
      post: { latest: () => ({}) },
      store,
      ids: new MessageIds(storeId, 1),
      judging: { plan: bench.plan, state: bench.state },
      learning: {} as Parameters<typeof answerAsks>[1]['learning'],
      now: () => bench.t,
    },
  );
  const ask = async (verb: string, body: object) =>
    (await handlers.get(verb)!({ id: 'c-1', ...body } as never)) as unknown as Page;
  for (let i = 0; i < 300; i++) {
    bench.seconds++;
    await ask('note', { machine: 'pump-1', by: 'ann', text: `${i} ${'x'.repeat(500)}` });
  }
  const from = (await store.journal({ limit: 1, keep: 'oldest' }))[0]!.t;
  const seen: string[] = [];
  let page = await ask('journal', { since: from });
  for (;;) {
    expect(JSON.stringify(page).length).toBeLessThan(50_000);
    seen.push(...page.journal.map(({ text }) => text.split(' ')[0]!));
    if (!page.more) break;
    page = await ask('journal', { since: page.journal.at(-1)!.id });
  }
  expect(seen).toEqual(Array.from({ length: 300 }, (_, i) => String(i)));
  const newest = await ask('journal', {});
  expect(newest.more).toBe(true);
  expect(newest.journal.at(-1)?.text).toMatch(/^299 /);
});
