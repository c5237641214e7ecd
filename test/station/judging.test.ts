import { describe, expect, it } from 'vitest';
import { EMPTY_STATE } from '../../src/alarm/engine.ts';
import { planAlarms } from '../../src/alarm/plan.ts';
import { Judging } from '../../src/station/judging.ts';
import { makeMachine, makePoint, makeReading, makeStation } from '../alarm/support.ts';

const points = ['de-h', 'de-v', 'de-a'].map((id) => makePoint('pump-1', id, 'node-1'));
const [h = '', v = '', a = ''] = points.map(({ key }) => key);

function bench(running?: Parameters<typeof makeMachine>[2]): Judging {
  let n = 1;
  const station = makeStation([makeMachine('pump-1', points, running)]);
  return new Judging(planAlarms(station), EMPTY_STATE, () => `test-${n++}`);
}

const shaking = makeReading({ mmS: 2 });
const smooth = makeReading({ mmS: 0.3, running: false, shaftHz: 24.7 });
const still = makeReading({ mmS: 0.01, running: false });

describe('a point that vibrates less than the threshold', () => {
  it('runs, and has its zone, where the speed shows in it and another point says that the machine runs', () => {
    const judging = bench();
    judging.settled(h, shaking);
    expect(judging.settled(a, smooth)).toMatchObject({ running: true, zone: 'A' });
  });

  it('does not where no speed shows, where nobody else runs, or where others have stopped since', () => {
    const judging = bench();
    judging.settled(h, shaking);
    expect(judging.settled(a, still)).toBe(still);
    judging.settled(h, still);
    expect(judging.settled(a, smooth)).toBe(smooth);
    // Two smooth points do not hold each other up.
    expect(judging.settled(v, smooth)).toBe(smooth);
    expect(judging.settled(a, smooth)).toBe(smooth);
  });

  it('goes on running until it falls well below the threshold, so that hovering about it starts nothing', () => {
    const judging = bench();
    const at = (mmS: number) => judging.settled(h, makeReading({ mmS, running: mmS > 0.5 })).running;
    // 0.5 mm/s is the threshold, 0.4 where it stops.
    expect([0.45, 0.6, 0.45, 0.52, 0.42, 0.39, 0.45, 0.6].map(at)).toEqual([
      false,
      true,
      true,
      true,
      true,
      false,
      false,
      true,
    ]);
  });

  it('goes by what is told where the machine is told of', () => {
    const judging = bench({ running: { kind: 'mqtt', topic: 'plc/run' } });
    judging.settled(h, shaking);
    expect(judging.settled(a, smooth)).toBe(smooth);
  });
});
