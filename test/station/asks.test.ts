/** What a control room may ask of a station, through a broker and the running agent. */
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { payloadSchemas } from '../../src/uplink/payload-schemas.ts';
import { forebay } from '../support/agent.ts';
import { sleep } from '../support/proxy.ts';
import { PumpRig } from '../support/pump-rig.ts';
import { haveSocat } from '../support/socat.ts';

describe.runIf(haveSocat)('asks', () => {
  let rig: PumpRig;
  const by = 'ann';
  const zone = 'pump-1/alarm/h.zone';
  beforeAll(async () => {
    rig = await PumpRig.start();
    rig.mmS[1] = 5;
    rig.mmS[2] = 10;
    await rig.until(zone, { state: 'unacknowledged' });
  }, 60_000);
  afterAll(() => rig.dispose());

  const refused = async (verb: string, body: Record<string, unknown>) => {
    const answer = await rig.ask(verb, body);
    expect(answer.ok, JSON.stringify(answer)).toBe(false);
    return String(answer.error);
  };
  const done = async (verb: string, body: Record<string, unknown>) => {
    const answer = await rig.ask(verb, body);
    expect(answer, JSON.stringify(answer)).toMatchObject({ ok: true });
    return answer;
  };

  it('readings: the latest of every point, as it would be published', async () => {
    const { readings } = (await done('readings', {})) as { readings: Record<string, object> };
    expect(Object.keys(readings).sort()).toEqual(
      ['pump-1/h', 'pump-2/h', 'pump-3/h', 'pump-4/h', 'pump-5/h', 'pump-6/p', 'pump-6/q', 'pump-6/r'].sort(),
    );
    for (const reading of Object.values(readings)) {
      expect(payloadSchemas.reading.safeParse({ id: 'none-1', ...reading }).error).toBeUndefined();
    }
    expect(readings['pump-3/h']).toMatchObject({ running: true, zone: 'A' });
  }, 30_000);

  it('acknowledge: refused for another raising or another alarm, and for the second time', async () => {
    const { raised } = await rig.until(zone, { state: 'unacknowledged' });
    const alarm = 'pump-1/h.zone';
    expect(await refused('acknowledge', { alarm, raised: 'none-7', by })).toMatch(`raised is ${raised} now`);
    expect(await refused('acknowledge', { alarm: 'pump-9/h.zone', by })).toBe(
      'no alarm pump-9/h.zone in this station',
    );
    expect(await refused('acknowledge', { alarm })).toBe('by is missing');
    expect(rig.last(zone)).toMatchObject({ state: 'unacknowledged' });
    await done('acknowledge', { alarm, raised, by });
    await rig.until(zone, { state: 'acknowledged', acknowledged_by: by, raised });
    expect(await refused('acknowledge', { alarm, by })).toBe(
      'nothing to acknowledge: the alarm is acknowledged',
    );
  }, 30_000);

  it('shelve and unshelve: for a time, by somebody, and once', async () => {
    const alarm = 'pump-3/h.zone';
    expect(await refused('shelve', { alarm, by, minutes: 0.5 })).toBe('minutes is a number from 1 to 1440');
    expect(await refused('shelve', { alarm, by, minutes: 'long' })).toBe('minutes must be a number');
    await done('shelve', { alarm, by, minutes: 30 });
    const told = await rig.until('pump-3/alarm/h.zone', { state: 'shelved' });
    expect(told.reason).toBe('shelved by ann for 30 min');
    await done('unshelve', { alarm, by });
    await rig.until('pump-3/alarm/h.zone', { state: 'normal' });
    expect(await refused('unshelve', { alarm, by })).toBe('the alarm is not on the shelf');
  }, 30_000);

  it('out-of-service and in-service: an alarm, a point or a machine, with a reason', async () => {
    const why = 'the bearing is being changed';
    expect(await refused('out-of-service', { machine: 'pump-6', by })).toBe('why is missing');
    expect(await refused('out-of-service', { machine: 'pump-6', point: 'pump-6/p', by, why })).toBe(
      'one of alarm, point, machine is needed',
    );
    expect(await refused('out-of-service', { machine: 'pump-9', by, why })).toBe(
      'no alarm, point or machine pump-9 in this station',
    );
    await done('out-of-service', { machine: 'pump-4', by, why });
    await rig.until('pump-4/alarm/h.zone', {
      state: 'out-of-service',
      reason: `out of service by ann: ${why}`,
    });
    await rig.until('pump-4/alarm/h.sensor', { state: 'out-of-service' });
    await done('in-service', { point: 'pump-4/h', by, why: 'done' });
    for (const rule of ['zone', 'sensor']) await rig.until(`pump-4/alarm/h.${rule}`, { state: 'normal' });
  }, 60_000);

  it('reset: only of a latched alarm whose condition is over', async () => {
    const alarm = 'pump-1/h.stuck';
    expect(await refused('reset', { alarm: 'pump-1/h.zone', by })).toMatch(/does not stand latched/);
    rig.mmS[1] = 10;
    await rig.until('pump-1/alarm/h.stuck', { state: 'unacknowledged' }, 70);
    expect(await refused('reset', { alarm, by })).toBe('its condition still holds');
    rig.mmS[1] = 2;
    await rig.settle(5);
    expect(rig.last('pump-1/alarm/h.stuck')).toMatchObject({ state: 'unacknowledged' });
    await done('acknowledge', { alarm, by });
    await done('reset', { alarm, by });
    await rig.until('pump-1/alarm/h.stuck', { state: 'normal', reason: 'reset by ann' });
  }, 120_000);

  it('test: a marked alarm through the whole chain, gone when it is acknowledged', async () => {
    const alarm = 'pump-5/h.zone';
    await done('test', { alarm, level: 'danger' });
    const told = await rig.until('pump-5/alarm/h.zone', {
      state: 'unacknowledged',
      test: true,
      level: 'danger',
    });
    expect(told.reason).toMatch(/nothing was measured/);
    await done('acknowledge', { alarm, raised: told.raised, by });
    expect((await rig.until('pump-5/alarm/h.zone', { state: 'normal' })).test).toBeUndefined();
  }, 30_000);

  it('note and journal: in order, from an id or a time on', async () => {
    const { noted, new_baseline } = await done('note', { machine: 'pump-5', by, text: 'bearing changed' });
    expect(new_baseline).toMatchObject({ ask: 'baseline', with: { machine: 'pump-5', action: 'start' } });
    expect(await refused('note', { machine: 'pump-9', by, text: 'x' })).toBe('there is no machine pump-9');
    const all = (await done('journal', {})) as { journal: Record<string, unknown>[]; more: boolean };
    const ns = all.journal.map(({ id }) => Number(String(id).split('-')[1]));
    expect(ns).toEqual([...ns].sort((a, b) => a - b));
    expect(all.journal.at(-1)).toMatchObject({
      kind: 'note',
      machine: 'pump-5',
      id: noted,
      by,
      text: 'bearing changed',
    });
    const tested = all.journal.find(({ test }) => test === true);
    expect(tested).toMatchObject({
      kind: 'alarm',
      machine: 'pump-5',
      alarm: 'h.zone',
      state: 'unacknowledged',
    });
    const raised = all.journal.find(({ alarm, machine }) => machine === 'pump-1' && alarm === 'h.zone');
    expect(raised).toMatchObject({ state: 'unacknowledged', reading: { zone: 'C', running: true } });
    const after = (await done('journal', { since: tested?.id })) as typeof all;
    expect(after.journal).toEqual(all.journal.slice(all.journal.indexOf(tested!) + 1));
    const from = (await done('journal', { since: String(tested?.t) })) as typeof all;
    expect(from.journal[0]).toEqual(tested);
    expect(await refused('journal', { since: 'yesterday' })).toMatch(/^since is neither an id nor a time/);
    expect(await refused('journal', { since: 'other0-1' })).toMatch(
      /neither a time nor an id of this station/,
    );
  }, 30_000);

  it('trend: a figure over time', async () => {
    const [from, to] = [-3600, 60].map((s) => new Date(Date.now() + 1000 * s).toISOString());
    const asked = { point: 'pump-3/h', watch: 'velocity.overall', from, to };
    const { trend } = (await done('trend', asked)) as { trend: { mean: number; count: number }[] };
    expect(trend).toHaveLength(1);
    // 2 mm/s is what the node sends.
    expect(Math.abs(trend[0]!.mean / 2 - 1)).toBeLessThan(0.02);
    expect(await refused('trend', { ...asked, point: 'pump-9/h' })).toBe('there is no point pump-9/h');
    expect(await refused('trend', { ...asked, from: to, to: from })).toBe('`from` must be before `to`');
  }, 30_000);

  it('baseline: refused for a machine in zone D, shown for another', async () => {
    // Refusals are limited to ten at once and one in five seconds.
    await sleep(20_000);
    expect(await refused('baseline', { machine: 'pump-2', action: 'start' })).toBe(
      'pump-2/h is in zone D: a baseline is learned from a machine that is well',
    );
    expect(await refused('baseline', { machine: 'pump-9', action: 'show' })).toBe(
      'there is no machine pump-9',
    );
    expect(await refused('baseline', { machine: 'pump-3', action: 'accept' })).toMatch(/nothing was learned/);
    expect(await done('baseline', { machine: 'pump-3', action: 'show' })).toMatchObject({
      machine: 'pump-3',
      learning: null,
      points: { h: { readings: null, proposed: null, refused: null, accepted: null } },
    });
  }, 60_000);

  it('refuses what is malformed, too large, unknown or not enabled, with a reason', async () => {
    await sleep(20_000);
    const error = async (verb: string, text: string, id: string) => {
      const answer = await rig.ask(verb, text, id);
      expect(answer.ok).toBe(false);
      return answer.error;
    };
    expect(await error('readings', '{"id":"m-1", oops', 'm-1')).toBe('the payload is not a JSON object');
    const large = JSON.stringify({ id: 'm-2', machine: 'pump-1', by, text: 'x'.repeat(5000) });
    expect(await error('note', large, 'm-2')).toBe('an ask may have 4096 bytes, this one has more');
    expect(await refused('dance', {})).toBe('there is no such ask');
    expect(await refused('snapshot', { machine: 'pump-1' })).toBe('snapshot is not enabled at this station');
    const answers = () => rig.heard.filter(({ topic }) => topic.startsWith('answer/')).length;
    const before = answers();
    // A repeat, a retained one and one without a usable id are ignored.
    await rig.publish('readings', JSON.stringify({ id: 'm-1' }));
    await rig.publish('readings', JSON.stringify({ id: 'm-3' }), true);
    await rig.publish('readings', '', true);
    await rig.publish('readings', JSON.stringify({ id: 'a b' }));
    await sleep(1500);
    // A subscriber that is there already gets what is retained as any other message.
    expect(answers() - before).toBe(1);
  }, 60_000);

  it('answers each of thirty that come at once, and refuses those that are too many', async () => {
    await sleep(10_000);
    await Promise.all(
      Array.from({ length: 30 }, (_, i) =>
        rig.publish('baseline', JSON.stringify({ id: `f-${i}`, machine: 'pump-3', action: 'show' })),
      ),
    );
    await sleep(2000);
    const answers = Array.from({ length: 30 }, (_, i) => rig.last(`answer/f-${i}`)!);
    expect(answers).not.toContain(undefined);
    const served = answers.filter(({ ok }) => ok === true);
    expect(served.length).toBeGreaterThan(0);
    expect(served.length).toBeLessThanOrEqual(11);
    for (const { error } of answers.filter(({ ok }) => ok === false)) expect(error).toMatch(/^too many asks/);
  }, 40_000);

  it('the journal command prints the same, while the agent runs and after it', async () => {
    await sleep(5000);
    const { journal } = (await done('journal', {})) as { journal: Record<string, unknown>[] };
    const lines = async (...more: string[]) => {
      const { status, out } = await forebay('journal', '-c', rig.agent.stationFile, '--json', ...more);
      expect(status, out).toBe(0);
      return out
        .split('\n')
        .filter((line) => line !== '')
        .map((line) => JSON.parse(line) as Record<string, unknown>);
    };
    const while_ = await lines();
    // The answer to an ask is bounded; the newest of it are the newest here.
    expect(while_.slice(-journal.length)).toEqual(journal);
    const alarms = while_.filter(({ kind }) => kind === 'alarm');
    expect(alarms.length).toBeGreaterThan(10);
    for (const { kind: _, machine, alarm, reading, ...payload } of alarms) {
      expect(`${machine}/${alarm}`).toMatch(/^(pump-\d|agent)\/[a-z0-9-]+\.[a-z]+$/);
      expect(payloadSchemas.alarm.safeParse(payload).error).toBeUndefined();
      if (reading !== null) expect(reading).toMatchObject({ velocity: { unit: 'mm/s' } });
    }
    const since = String(while_[5]!.t);
    expect(await lines('--since', since)).toEqual(while_.filter(({ t }) => String(t) >= since));
    expect((await forebay('journal', '-c', rig.agent.stationFile, '--since', 'noon')).status).toBe(2);
    const text = (await forebay('journal', '-c', rig.agent.stationFile)).out;
    expect(text).toMatch(
      / ALARM pump-1\/h\.zone unacknowledged alert velocity overall above 4 mm\/s for 2 s/,
    );
    expect(text).toMatch(/ pump-5 note by ann: bearing changed$/m);
    expect(await rig.agent.stop()).toBe(0);
    expect((await lines()).slice(0, while_.length)).toEqual(while_);
  }, 60_000);

  it('said nothing that its schemas do not allow', () => {
    expect(rig.heard.length).toBeGreaterThan(50);
    expect(rig.invalid()).toEqual([]);
  });
});
