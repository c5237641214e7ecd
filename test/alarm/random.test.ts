/** Random lives of a small station: restarts change nothing, nothing is told twice, all is told in the end. */

import fc from 'fast-check';
import { expect, test } from 'vitest';
import type { AlarmEffect, StoredRow } from '../../src/alarm/effects.ts';
import type { AlarmPayload } from '../../src/alarm/payload.ts';
import { alarmsIn, Bench, makeMachine, makePoint, makeStation, zoneRule } from './support.ts';

const POINTS = ['h', 'v', 'a', 'b'].map((id) => makePoint('pump-1', id, 'node-1'));
const RULES = [
  { ...zoneRule, onDelayS: 10, offDelayS: 10 },
  {
    ...zoneRule,
    id: 'kept',
    latched: true,
    onDelayS: 0,
    test: { kind: 'above', alert: 5, danger: null } as const,
  },
  { ...zoneRule, id: 'sensor', watch: '', test: { kind: 'sensor' } as const },
];
const station = makeStation([makeMachine('pump-1', POINTS)], RULES);

type Action =
  | { do: 'read'; point: number; mmS: number | null; running: boolean; flat: boolean }
  | { do: 'tick'; s: number }
  | { do: 'ask'; what: number; point: number }
  | { do: 'link'; silent: boolean }
  | { do: 'restart' };

const action: fc.Arbitrary<Action> = fc.oneof(
  {
    weight: 12,
    arbitrary: fc.record({
      do: fc.constant('read' as const),
      point: fc.nat(3),
      mmS: fc.constantFrom(1, 3.8, 5, 5, 8, 8, null),
      running: fc.constantFrom(true, true, true, false),
      flat: fc.boolean(),
    }),
  },
  { weight: 4, arbitrary: fc.record({ do: fc.constant('tick' as const), s: fc.constantFrom(1, 10, 70) }) },
  { weight: 3, arbitrary: fc.record({ do: fc.constant('ask' as const), what: fc.nat(6), point: fc.nat(3) }) },
  { weight: 1, arbitrary: fc.record({ do: fc.constant('link' as const), silent: fc.boolean() }) },
  { weight: 2, arbitrary: fc.constant({ do: 'restart' as const }) },
);

function run(bench: Bench, act: Action): readonly AlarmEffect[] {
  const { t } = bench;
  switch (act.do) {
    case 'read': {
      const { mmS, running, flat } = act;
      const why = mmS === null && flat ? ['flat line: the counts never change'] : [];
      return bench.readOne(POINTS[act.point]!.key, { mmS, running, why }, 10);
    }
    case 'tick':
      return bench.tick(act.s);
    case 'link':
      return bench.put({
        kind: 'link',
        link: 'node-1',
        conditions: act.silent ? ['silent'] : [],
        detail: null,
        t,
      });
    case 'restart':
      return [];
    case 'ask': {
      const { key } = POINTS[act.point]!;
      const alarm = `${key}.${act.what % 2 === 0 ? 'zone' : 'kept'}`;
      const by = 'ann';
      if (act.what < 2) return bench.put({ kind: 'acknowledge', alarm, by, t });
      if (act.what === 2) return bench.put({ kind: 'acknowledge', alarm: 'pump-1/machine.zone', by, t });
      if (act.what === 3) return bench.put({ kind: 'reset', alarm, by, t });
      if (act.what === 4) return bench.put({ kind: 'shelve', alarm, minutes: 1, by, t });
      if (act.what === 5) return bench.put({ kind: 'out-of-service', target: key, by, why: 'work', t });
      return bench.put({ kind: 'in-service', target: key, by, why: '', t });
    }
  }
}

/** What a person knows of the alarms that are not normal. */
function standingOf(bench: Bench): unknown {
  return Object.entries(bench.state.alarms)
    .filter(([, { life }]) => life.state !== 'normal')
    .map(([key, { life, raised, acknowledgedBy, told }]) => ({
      key,
      state: life.state,
      raised,
      acknowledgedBy,
      told,
    }))
    .sort((a, b) => a.key.localeCompare(b.key));
}

const sequence = fc.array(action, { maxLength: 120 });

test('a station that is restarted at any moment does what one does that is not', () => {
  fc.assert(
    fc.property(sequence, (actions) => {
      const cut = new Bench(station);
      const whole = new Bench(station);
      for (const act of actions) {
        if (act.do === 'restart') expect(cut.restart()).toEqual([]);
        else expect(run(cut, act)).toEqual(run(whole, act));
      }
    }),
    { seed: 4, numRuns: 300 },
  );
});

test('a power cut that loses all but the urgent rows tells nothing twice, and in the end every topic is true', () => {
  fc.assert(
    fc.property(sequence, (actions) => {
      const bench = new Bench(station);
      const kept: Record<string, StoredRow> = {};
      const last = new Map<string, AlarmPayload>();
      const see = (effects: readonly AlarmEffect[]) => {
        for (const effect of effects) {
          if (effect.kind === 'row' && effect.urgent && effect.row !== null)
            kept[effect.key] = structuredClone(effect.row);
          if (effect.kind !== 'publish' || effect.class !== 'alarm') continue;
          const before = last.get(effect.topic);
          const { id: _, t: __, ...said } = effect.payload;
          const { id: ___, t: ____, ...was } = before ?? effect.payload;
          if (before !== undefined) expect(said).not.toEqual(was);
          last.set(effect.topic, effect.payload);
        }
      };
      const cut = () => {
        const standing = standingOf(bench);
        for (const key of Object.keys(bench.rows)) delete bench.rows[key];
        Object.assign(bench.rows, structuredClone(kept));
        see(bench.restart());
        expect(standingOf(bench)).toEqual(standing);
      };
      for (const act of actions) {
        if (act.do === 'restart') cut();
        else see(run(bench, act));
      }
      for (let i = 0; i < 200; i++) see(bench.tick(10));
      for (const [key, row] of Object.entries(bench.state.alarms)) {
        expect(last.get(bench.plan.alarms.get(key)!.topic)?.state ?? 'normal').toBe(row.life.state);
      }
      expect(bench.state.waiting).toEqual([]);
      cut();
      expect(alarmsIn(bench.tick(10))).toEqual([]);
    }),
    { seed: 5, numRuns: 300 },
  );
});
