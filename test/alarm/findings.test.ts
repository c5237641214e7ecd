import { expect, test } from 'vitest';
import { machineEvidence } from '../../src/alarm/evidence.ts';
import type { Finding } from '../../src/machine/finding-evidence.ts';
import { findingsFor } from '../../src/machine/findings.ts';
import type { Reading } from '../../src/measure/reading.ts';
import { Bench, makeReading, onePoint, type Shown, statesIn } from './support.ts';

const unbalance: Finding = {
  fault: 'unbalance',
  likelihood: 'possible',
  points: ['de-h'],
  evidence: ['1x is 90 % of the overall velocity'],
  check: 'have it balanced',
};

function publish(bench: Bench, findings: readonly Finding[]) {
  const effects = bench.put({ kind: 'findings', machineId: 'pump-1', findings, t: bench.t });
  return effects.flatMap((e) => (e.kind === 'publish' && e.class === 'finding' ? [e.payload] : []));
}

test('a finding is told when it shows in three of five evaluations, and gone when in none', () => {
  const bench = new Bench(onePoint());
  bench.read({ mmS: 1 });
  expect([publish(bench, [unbalance]), publish(bench, []), publish(bench, [unbalance])]).toEqual([
    [],
    [],
    [],
  ]);
  const [told] = publish(bench, [unbalance]);
  expect(Object.keys(told!)).toEqual(['id', 't', 'findings']);
  expect(told!.findings).toEqual([unbalance]);
  bench.tick(1);
  expect(statesIn(bench.effects).at(-1)!.finding).toBe('unbalance');
  for (let i = 0; i < 4; i++) expect(publish(bench, [])).toEqual([]);
  expect(publish(bench, [])[0]!.findings).toEqual([]);
  // The state waits its turn: a finding is a detail, and two of them within a minute are enough.
  for (const s of [1, 61]) bench.tick(s);
  expect(statesIn(bench.effects).at(-1)!.finding).toBeNull();
});

test('a finding is held through stops, starts and readings without figures, and told once', () => {
  const bench = new Bench(onePoint());
  const told: unknown[] = [];
  const go = (n: number, shown: Shown, findings: readonly Finding[]) => {
    for (let i = 0; i < n; i++) {
      bench.read(shown);
      told.push(...publish(bench, findings));
    }
  };
  for (let run = 0; run < 5; run++) {
    // The start delay is 20 s: two readings, in which the hard start shows nothing of the fault.
    if (run > 0) go(2, { mmS: 9 }, []);
    go(6, { mmS: 5 }, [unbalance]);
    go(6, { mmS: null, why: ['flat line: the counts never change'] }, []);
    go(6, { mmS: 5 }, [unbalance]);
    go(20, { mmS: 0.05, running: false }, []);
  }
  expect(told).toHaveLength(1);
  expect(statesIn(bench.effects).at(-1)!.finding).toBe('unbalance');
  // Nor do the starts by themselves make one.
  const hard = new Bench(onePoint());
  const unheard: unknown[] = [];
  for (let start = 0; start < 5; start++) {
    hard.read({ mmS: 0.05, running: false });
    hard.read({ mmS: 9 });
    unheard.push(...publish(hard, [unbalance]));
  }
  expect(unheard).toEqual([]);
});

test('flickering between possible and likely is one message', () => {
  const bench = new Bench(onePoint());
  bench.read({ mmS: 5 });
  const told = Array.from({ length: 40 }, (_, i) =>
    publish(bench, [{ ...unbalance, likelihood: i % 2 === 0 ? 'likely' : 'possible' }]),
  ).flat();
  expect(told.map(({ findings }) => findings[0]!.likelihood)).toEqual(['possible', 'likely']);
});

function reading(mmS: number, first: number): Reading {
  const made = makeReading({ mmS });
  const orders = { 1: { mm_s: first, deg: null }, 2: { mm_s: 0.2, deg: null }, 3: { mm_s: 0.1, deg: null } };
  return { ...made, orders, velocity: { ...made.velocity, low: 0.2, harmonics: 0.3 } };
}

test('from readings to a finding: zone C speaks, zone B does not, a standing alarm does', () => {
  const bench = new Bench(onePoint());
  const named = (one: Reading) =>
    findingsFor(machineEvidence(bench.plan, 'pump-1', new Map([['pump-1/de-h', one]]), bench.state)).map(
      (f) => f.fault,
    );
  expect(named(reading(5, 4.8))).toEqual(['unbalance']);
  expect(named(reading(3.8, 3.7))).toEqual([]);
  for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
  expect(named(reading(3.8, 3.7))).toEqual(['unbalance']);
  expect(named({ ...reading(5, 4.8), running: false })).toEqual([]);
});

test('an accused bearing comes through with its line', () => {
  const bench = new Bench(onePoint());
  const readings = new Map([['pump-1/de-h', makeReading({ mmS: 1, defect: 'outer' })]]);
  const { points } = machineEvidence(bench.plan, 'pump-1', readings, bench.state);
  expect(points[0]!.bearing).toMatchObject({ defect: 'outer', hz: 88, overFloorDb: 3 });
});
