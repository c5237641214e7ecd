/** Alarms of the real agent through power cuts and pulled cables, as a subscriber sees them. */
import { describe, it } from 'vitest';
import { PumpRig } from '../support/pump-rig.ts';
import { haveSocat } from '../support/socat.ts';

const zoneOf = (pump: number) => `pump-${pump}/alarm/h.zone`;

describe.runIf(haveSocat)('the life of an alarm', () => {
  it.concurrent('survives kill -9 in each state: nothing told twice, nothing forgotten, what cleared meanwhile is told', async ({
    expect,
    onTestFinished,
  }) => {
    const rig = await PumpRig.start();
    onTestFinished(() => rig.dispose());
    const alarmsHeard = () => rig.heard.filter(({ topic }) => topic.includes('/alarm/'));
    const by = 'ann';
    await rig.until('pump-6/state', { severity: 0 });
    Object.assign(rig.mmS, { 2: 5, 3: 5, p: 5, q: 5, r: 5 });
    // Pump 1 is normal, 2 acknowledged, 3 returned, 4 on the shelf, 5 out of service; of the three points of pump 6
    // two are unacknowledged, one is suppressed by design, and the machine's own alarm speaks for them.
    const raised = (await rig.until(zoneOf(2), { state: 'unacknowledged', level: 'alert' })).raised;
    expect(await rig.ask('acknowledge', { alarm: 'pump-2/h.zone', raised, by })).toMatchObject({ ok: true });
    await rig.until(zoneOf(3), { state: 'unacknowledged' });
    rig.mmS[3] = 2;
    await rig.ask('shelve', { alarm: 'pump-4/h.zone', by, minutes: 60 });
    await rig.ask('out-of-service', { point: 'pump-5/h', by, why: 'the bearing is being changed' });
    const states = [
      [zoneOf(2), 'acknowledged', 'alert'],
      [zoneOf(3), 'returned-unacknowledged', 'alert'],
      [zoneOf(4), 'shelved', null],
      [zoneOf(5), 'out-of-service', null],
      ['pump-6/alarm/machine.zone', 'unacknowledged', 'alert'],
      ['pump-6/alarm/p.zone', 'unacknowledged', 'alert'],
      ['pump-6/alarm/q.zone', 'unacknowledged', 'alert'],
      ['pump-6/alarm/r.zone', 'suppressed-by-design', 'alert'],
    ] as const;
    for (const [topic, state, level] of states) await rig.until(topic, { state, level }, 90);

    const before = alarmsHeard().length;
    await rig.powerCut();
    await rig.settle();
    expect(alarmsHeard().slice(before)).toEqual([]);

    // In the dark, conditions clear and others come.
    await rig.powerCut(() => {
      Object.assign(rig.mmS, { 1: 5, 2: 2, 3: 2, 4: 5, 5: 5, p: 2, q: 2, r: 2 });
    });
    const after = [
      [zoneOf(1), 'unacknowledged', 'alert'],
      [zoneOf(2), 'normal', null],
      [zoneOf(4), 'shelved', 'alert'],
      [zoneOf(5), 'out-of-service', 'alert'],
      ['pump-6/alarm/machine.zone', 'returned-unacknowledged', 'alert'],
      ['pump-6/alarm/p.zone', 'returned-unacknowledged', 'alert'],
      ['pump-6/alarm/q.zone', 'returned-unacknowledged', 'alert'],
      ['pump-6/alarm/r.zone', 'normal', null],
    ] as const;
    for (const [topic, state, level] of after) await rig.until(topic, { state, level }, 90);
    expect(rig.told(zoneOf(3))).toEqual(['unacknowledged alert', 'returned-unacknowledged alert']);
    expect(rig.told(zoneOf(2))).toEqual(['unacknowledged alert', 'acknowledged alert', 'normal null']);
    // Who did what is not forgotten: these are refused unless the shelf and the service were kept.
    expect(await rig.ask('unshelve', { alarm: 'pump-4/h.zone', by })).toMatchObject({ ok: true });
    expect(await rig.ask('in-service', { point: 'pump-5/h', by, why: 'done' })).toMatchObject({ ok: true });
    expect(await rig.ask('acknowledge', { alarm: 'pump-6/machine.zone', by })).toMatchObject({ ok: true });
    await rig.until(zoneOf(4), { state: 'unacknowledged', level: 'alert' });
    await rig.until(zoneOf(5), { state: 'unacknowledged', level: 'alert' });
    for (const about of ['machine', 'p', 'q']) {
      await rig.until(`pump-6/alarm/${about}.zone`, { state: 'normal' }, 90);
    }
    // Each alarm was announced once: one `raised` each, all different. The message that tells it first may carry an id
    // of its own, where the machine had spoken six times that minute and it had to wait.
    const announced = new Map<string, Set<unknown>>();
    for (const { topic, payload } of alarmsHeard()) {
      if (payload.raised === null) continue;
      announced.set(topic, (announced.get(topic) ?? new Set()).add(payload.raised));
    }
    const once = [1, 2, 3, 4, 5]
      .map(zoneOf)
      .concat(['machine', 'p', 'q'].map((about) => `pump-6/alarm/${about}.zone`));
    expect([...announced].map(([topic, ids]) => `${topic} ${ids.size}`).sort()).toEqual(
      once.map((topic) => `${topic} 1`).sort(),
    );
    expect(new Set([...announced.values()].flatMap((ids) => [...ids])).size).toBe(once.length);
    expect(rig.invalid()).toEqual([]);
  }, 240_000);

  it.concurrent('does not end because the sensor is unplugged, and ends once it is seen to have cleared', async ({
    expect,
    onTestFinished,
  }) => {
    const rig = await PumpRig.start();
    onTestFinished(() => rig.dispose());
    await rig.until('pump-1/state', { severity: 0 });
    rig.mmS[1] = 5;
    await rig.until(zoneOf(1), { state: 'unacknowledged' });
    await rig.until('pump-1/state', { severity: 1 });
    rig.unplug();
    // Unknown outranks alert; whatever the number of its channels, the node is one alarm.
    await rig.until('pump-1/state', { severity: 3 }, 40);
    const lost = () => rig.heard.filter(({ topic }) => topic.startsWith('agent/alarm/node-1.'));
    await rig.until('agent/alarm/node-1.refused', { state: 'unacknowledged' }, 20);
    expect(rig.told(zoneOf(1))).toEqual(['unacknowledged alert']);
    rig.mmS[1] = 2;
    await rig.plug();
    await rig.until(zoneOf(1), { state: 'returned-unacknowledged' }, 40);
    await rig.until('pump-1/state', { severity: 0 }, 90);
    await rig.until('agent/alarm/node-1.refused', { state: 'returned-unacknowledged' }, 60);
    expect(lost()).toHaveLength(2);
    expect(rig.told(zoneOf(1))).toEqual(['unacknowledged alert', 'returned-unacknowledged alert']);
    expect(rig.heard.filter(({ topic }) => topic.endsWith('.sensor'))).toEqual([]);
    expect(rig.invalid()).toEqual([]);
  }, 180_000);
});
