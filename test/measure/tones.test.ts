import { describe, expect, it } from 'vitest';
import { EMPTY_STATE } from '../../src/alarm/engine.ts';
import { machineEvidence } from '../../src/alarm/evidence.ts';
import { planAlarms } from '../../src/alarm/plan.ts';
import type { Machine, Point } from '../../src/config/station.ts';
import { slip, synchronousHz, twiceMainsOffOrderHz } from '../../src/machine/electrical.ts';
import { findingsFor } from '../../src/machine/findings.ts';
import { measureRecord } from '../../src/measure/measure.ts';
import type { Reading } from '../../src/measure/reading.ts';
import { makeMachine, makePoint, makeStation } from '../alarm/support.ts';
import { gOfVelocity, planOf, recordOf, type Tone, usual } from './bench.ts';

const RATE_HZ = 12_000;
/** 1480 r/min of a motor with four poles on 50 Hz: its fourth multiple, 98.67 Hz, is 1.33 Hz from twice mains. */
const SHAFT_HZ = 1480 / 60;
const mains = { motor: { poles: 4, supply: 'mains' }, vanes: 6 } as const;

interface Asked {
  machine?: Partial<Machine>;
  point?: Partial<Point>;
  lines?: number;
}

function read(tones: readonly Tone[], { machine = {}, point = {}, lines = 3200 }: Asked = {}): Reading {
  const velocity = { ...usual.velocity, lines };
  const plan = planOf({ rateHz: RATE_HZ, machine: { ...mains, ...machine }, point, measure: { velocity } });
  return measureRecord(
    plan,
    recordOf({ rateHz: RATE_HZ, samples: plan.recordSamples, tones, noiseG: 0.005 }),
  );
}

const line = (hz: number, mmS: number): Tone => [hz, gOfVelocity(mmS, hz)];
const oneTimes = line(SHAFT_HZ, 2);

describe('tones of a reading', () => {
  it('are the lines at twice mains and at vanes × speed, each with its own velocity', () => {
    const { tones } = read([oneTimes, line(100, 1.5), line(4 * SHAFT_HZ, 3), line(6 * SHAFT_HZ, 0.8)]);
    // 3 mm/s stand 4.3 lines beside it: a Hann line has fallen by more than 31 dB there.
    expect(Math.abs(tones.twice_mains!.mm_s / 1.5 - 1)).toBeLessThan(0.03);
    expect(tones.twice_mains!.hz).toBeCloseTo(100, 1);
    expect(Math.abs(tones.vane_pass!.mm_s / 0.8 - 1)).toBeLessThan(0.01);
    expect(tones.vane_pass!.hz).toBeCloseTo(6 * SHAFT_HZ, 1);
  });

  it('find twice mains where the grid is 0.1 Hz off', () => {
    expect(read([oneTimes, line(100.2, 1.5)]).tones.twice_mains!.mm_s).toBeCloseTo(1.5, 1);
  });

  it('are null where they are not known: no vanes, no mains, an inverter, no speed', () => {
    const bare = read([oneTimes], { machine: { vanes: null, motor: { poles: 4, supply: null } } });
    expect(bare.tones).toEqual({ vane_pass: null, twice_mains: null });
    const driven = read([oneTimes], { machine: { motor: { poles: 4, supply: 'inverter' } } });
    expect(driven.tones.twice_mains).toBeNull();
    expect(read([]).tones).toEqual({ vane_pass: null, twice_mains: null });
  });

  it('leave twice mains null where the lines cannot tell it from a multiple of the shaft', () => {
    // 400 lines of 1000 Hz are 2.5 Hz apart; the pole pass frequency is 1.33 Hz.
    expect(read([oneTimes, line(100, 1.5)], { lines: 400 }).tones.twice_mains).toBeNull();
    // A motor that idles at 1497 r/min: 0.2 Hz of pole pass.
    const idle = read([line(24.95, 2), line(100, 1.5)]);
    expect(idle.shaft.hz).toBeCloseTo(24.95, 2);
    expect(idle.tones.twice_mains).toBeNull();
    expect(idle.tones.vane_pass).not.toBeNull();
  });

  it('do not take the vanes for those of another shaft', () => {
    const geared: Partial<Machine> = { points: [{ ratio: 2 } as Point] };
    expect(read([oneTimes], { machine: geared }).tones.vane_pass).toBeNull();
    expect(read([oneTimes], { machine: geared, point: { part: 'pump' } }).tones.vane_pass).not.toBeNull();
  });

  it('are null beyond Fmax', () => {
    expect(read([oneTimes], { machine: { vanes: 41 } }).tones.vane_pass).toBeNull();
  });
});

describe('from a record to a finding', () => {
  function faults(part: 'motor' | 'pump', tones: readonly Tone[]): string[] {
    const reading = read(tones, { point: { part } });
    const point = makePoint('pump-1', 'de-h', 'node-1', { part });
    const station = makeStation([makeMachine('pump-1', [point], mains)]);
    const evidence = machineEvidence(
      planAlarms(station),
      'pump-1',
      new Map([['pump-1/de-h', reading]]),
      EMPTY_STATE,
    );
    return findingsFor(evidence).map(({ fault, likelihood }) => `${fault} ${likelihood}`);
  }

  it('twice mains at a motor is electrical, its neighbour at four times the shaft is not', () => {
    expect(faults('motor', [oneTimes, line(100, 4)])).toEqual(['electrical possible']);
    expect(faults('motor', [oneTimes, line(4 * SHAFT_HZ, 4)])).not.toContain('electrical possible');
  });

  it('the vane pass at a pump is named, at another multiple it is not', () => {
    expect(faults('pump', [oneTimes, line(6 * SHAFT_HZ, 4)])).toEqual(['vane-pass likely']);
    expect(faults('pump', [oneTimes, line(7 * SHAFT_HZ, 4)])).not.toContain('vane-pass likely');
  });
});

describe('slip and pole pass', () => {
  // Worked numbers of the two functions; any handbook of electrical machines.
  it('of a motor with four poles', () => {
    expect(slip(synchronousHz(60, 4), 29.5)).toBeCloseTo(0.016667, 6);
    expect(slip(25, 25)).toBe(0);
    expect(twiceMainsOffOrderHz(50, 1480 / 60)).toBeCloseTo(1.3333, 4);
  });
});
