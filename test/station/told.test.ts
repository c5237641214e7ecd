import { describe, expect, it } from 'vitest';
import { ToldValues } from '../../src/station/told.ts';

function heard(payload: string, atS = 0): ToldValues {
  const clock = { s: 0 };
  const told = new ToldValues(['plc/pump-1'], () => clock.s);
  told.hear('plc/pump-1', payload, false);
  clock.s = atS;
  return told;
}

describe('ToldValues', () => {
  it.each([
    ['1480', 1480 / 60],
    [' {"rpm": 1480} ', 1480 / 60],
    ['{"hz": 24.67}', 24.67],
    ['0', 0],
    ['-3', null],
    ['fast', null],
    ['{"rpm": "1480"}', null],
  ])('reads %s as a speed of %s Hz', (payload, hz) => {
    expect(heard(payload).shaftHz('plc/pump-1')).toBe(hz);
  });

  it.each([
    ['1', true],
    ['on', true],
    ['OFF', false],
    ['{"running": false}', false],
    ['{"running": "run"}', true],
    ['maybe', null],
    ['2', null],
  ])('reads %s as running: %s', (payload, running) => {
    expect(heard(payload).running('plc/pump-1')).toBe(running);
  });

  it('no longer knows what was told too long ago, or never', () => {
    expect(heard('1480', 299).shaftHz('plc/pump-1')).toBeCloseTo(24.667, 3);
    expect(heard('1480', 301).shaftHz('plc/pump-1')).toBeNull();
    expect(heard('1480').shaftHz('plc/pump-2')).toBeNull();
  });

  it('takes nothing from topics that it was not given, nor oversized payloads', () => {
    const told = heard('1480');
    told.hear('other', '5', false);
    expect(told.shaftHz('other')).toBeNull();
    told.hear('plc/pump-1', '1'.repeat(300), false);
    expect(told.shaftHz('plc/pump-1')).toBeNull();
    expect(told.unreadable).toBe(1);
  });

  it('takes a retained word as the first one only: a teller that has gone grows old, however often the link comes back', () => {
    const clock = { s: 0 };
    const told = new ToldValues(['plc/pump-1'], () => clock.s);
    told.hear('plc/pump-1', '1480', true);
    expect(told.shaftHz('plc/pump-1')).toBeCloseTo(24.667, 3);
    for (clock.s = 100; clock.s <= 400; clock.s += 100) told.hear('plc/pump-1', '1480', true);
    expect(told.shaftHz('plc/pump-1')).toBeNull();
    told.hear('plc/pump-1', '1470', false);
    expect(told.shaftHz('plc/pump-1')).toBe(24.5);
    // Some publish their first word retained, and what follows not.
    told.hear('plc/pump-1', '1480', true);
    expect(told.shaftHz('plc/pump-1')).toBe(24.5);
  });

  it('counts payloads that cannot be read, not how often they were looked at', () => {
    const told = heard('n/a');
    for (let k = 0; k < 5; k++) {
      told.shaftHz('plc/pump-1');
      told.running('plc/pump-1');
    }
    expect(told.unreadable).toBe(1);
    told.hear('plc/pump-1', 'n/a', false);
    told.shaftHz('plc/pump-1');
    expect(told.unreadable).toBe(2);
  });
});
