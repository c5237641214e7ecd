/** Shelves that end by themselves, and learned values from refusal to alarm, with the agent as a process. */
import { describe, it } from 'vitest';
import { forebay } from '../support/agent.ts';
import { PumpRig } from '../support/pump-rig.ts';
import { haveSocat } from '../support/socat.ts';

describe.runIf(haveSocat)('with time', () => {
  it.concurrent('an alarm comes back from the shelf by itself, and asks to be noticed where its condition holds', async ({
    expect,
    onTestFinished,
  }) => {
    const rig = await PumpRig.start();
    onTestFinished(() => rig.dispose());
    rig.mmS[1] = 5;
    const first = await rig.until('pump-1/alarm/h.zone', { state: 'unacknowledged' });
    for (const pump of [1, 3]) {
      await rig.ask('shelve', { alarm: `pump-${pump}/h.zone`, by: 'ann', minutes: 1 });
      await rig.until(`pump-${pump}/alarm/h.zone`, { state: 'shelved' });
    }
    const shelvedMs = performance.now();
    const back = await rig.until('pump-1/alarm/h.zone', { state: 'unacknowledged' }, 90);
    const heldS = (performance.now() - shelvedMs) / 1000;
    expect(heldS).toBeGreaterThan(55);
    expect(back.raised).not.toBe(first.raised);
    expect(back.reason).toBe('its time on the shelf is over; its condition holds');
    await rig.until('pump-3/alarm/h.zone', { state: 'normal', reason: 'its time on the shelf is over' });
    expect(rig.invalid()).toEqual([]);
  }, 150_000);

  it.concurrent('a baseline is refused in zone C and from too little, learned by the command, kept over kill -9, and judged by', async ({
    expect,
    onTestFinished,
  }) => {
    const rig = await PumpRig.start();
    onTestFinished(() => rig.dispose());
    const machine = 'pump-1';
    rig.mmS[1] = 5;
    await rig.until('pump-1/state', { zone: 'C' }, 90);
    expect(await rig.ask('baseline', { machine, action: 'start' })).toMatchObject({
      ok: false,
      error: 'pump-1/h is in zone C: a baseline is learned from a machine that is well',
    });
    rig.mmS[1] = 1;
    await rig.until('pump-1/h/reading', { zone: 'A' });
    // Four seconds give at most eight readings, one in half a second.
    expect(await rig.ask('baseline', { machine, action: 'start', hours: 4 / 3600 })).toMatchObject({
      ok: true,
    });
    await rig.settle(7);
    const few = /^[1-9] good readings while running, 30 are needed$/;
    const shown = (await rig.ask('baseline', { machine, action: 'show' })) as {
      points?: { h?: { proposed: unknown; refused: string } };
    };
    expect(shown.points?.h).toMatchObject({ proposed: null, refused: expect.stringMatching(few) });
    expect(await rig.ask('baseline', { machine, action: 'accept' })).toMatchObject({
      ok: false,
      error: expect.stringMatching(/^nothing to accept: h: [1-9] good readings/),
    });

    rig.mmS[2] = 5;
    await rig.until('pump-2/alarm/h.zone', { state: 'unacknowledged' });
    const { status, out } = await forebay('learn', '-c', rig.agent.stationFile, '--hours', String(40 / 3600));
    expect(out).toMatch(/^pump-2: refused: pump-2\/h is in zone C/m);
    const learned =
      /^pump-1\/h: learned at (\S+) to (\S+) Hz from (\d+) readings: velocity\.overall (\S+) ± /m.exec(out);
    expect(learned, out).not.toBeNull();
    const [low, high, readings, median] = learned!.slice(1).map(Number) as [number, number, number, number];
    // What the node sends: 1 mm/s at 25 Hz.
    expect(Math.abs(low - 25)).toBeLessThan(0.5);
    expect(Math.abs(high - 25)).toBeLessThan(0.5);
    expect(readings).toBeGreaterThanOrEqual(30);
    expect(Math.abs(median - 1)).toBeLessThan(0.02);
    expect(status, out).toBe(0);

    await rig.powerCut();
    await rig.settle();
    expect(rig.told('pump-1/alarm/h.shift')).toEqual([]);
    rig.mmS[1] = 3;
    const told = await rig.until('pump-1/alarm/h.shift', { state: 'unacknowledged', level: 'alert' }, 90);
    // Twice the learned value is 2 mm/s, and so is a quarter of B/C (4.0 mm/s) above it (ISO 10816-3, 5.4.1).
    expect(Math.abs(Number(told.limit) - 2)).toBeLessThan(0.04);
    expect(told.reason).toMatch(/alert limit of the learned value/);
    const { journal } = (await rig.ask('journal', {})) as { journal?: Record<string, unknown>[] };
    const notes = journal?.filter(({ kind, machine: of }) => kind === 'note' && of === machine);
    expect(notes?.map(({ by, text }) => [by, String(text).split(' ')[0]])).toEqual([
      [null, 'learning'],
      ['forebay learn', 'learning'],
      ['forebay learn', 'baseline'],
    ]);
    expect(rig.invalid()).toEqual([]);
  }, 240_000);
});
