import { describe, expect, test } from 'vitest';
import {
  alarmsIn,
  Bench,
  bearingRule,
  brief,
  journalIn,
  makeMachine,
  makePoint,
  makeStation,
  onePoint,
  sensorRule,
  statesIn,
  zoneRule,
} from './support.ts';

describe('delays, in sample time', () => {
  test('an on-delay is met at the first reading at least that long after the first one over the limit', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 3 });
    for (const expected of [0, 0, 0, 1]) expect(alarmsIn(bench.read({ mmS: 5 }))).toHaveLength(expected);
    const [alarm] = alarmsIn(bench.effects);
    // First over the limit at 20 s, met at 50 s.
    expect(alarm).toMatchObject({ since: '2026-03-02T00:00:20.000Z', t: '2026-03-02T00:00:50.000Z' });
  });

  test('a reading within the limit starts the delay anew, a null reading only holds it', () => {
    const bench = new Bench(onePoint());
    const show = (...values: (number | null)[]) => values.flatMap((mmS) => alarmsIn(bench.read({ mmS })));
    expect(show(5, 5, 5, 3, 5, 5, 5)).toEqual([]);
    expect(show(null, null)).toEqual([]);
    expect(brief(show(5))).toEqual(['unacknowledged alert']);
  });

  test('an unknown elapsed time adds nothing', () => {
    const bench = new Bench(onePoint());
    const read = (elapsedS: number | null) => alarmsIn(bench.read({ mmS: 5 }, elapsedS));
    expect([...read(10), ...read(10), ...read(null), ...read(10)]).toEqual([]);
    expect(brief(read(10))).toEqual(['unacknowledged alert']);
  });

  test('the deadband matters only to clear: 10 % under 4.0 mm/s is 3.6 mm/s', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 4; i++) bench.read({ mmS: 4.1 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    for (let i = 0; i < 20; i++) bench.read({ mmS: 3.7 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    for (let i = 0; i < 6; i++) bench.read({ mmS: 3.5 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    bench.read({ mmS: 3.5 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('returned-unacknowledged');
  });
});

// Zones of ISO 10816-7 category I up to 200 kW: 2.5, 4.0, 6.6 mm/s.
test('a slow rise through B, C and D: one alert, one danger, each with its own since and raised', () => {
  const bench = new Bench(onePoint());
  for (let mmS = 2; mmS < 8; mmS += 0.1) bench.read({ mmS });
  const told = alarmsIn(bench.effects);
  expect(brief(told)).toEqual(['unacknowledged alert', 'unacknowledged danger']);
  expect(told[0]).toMatchObject({ limit: 4, unit: 'mm/s', raised: told[0]!.id, acknowledged_by: null });
  expect(told[1]).toMatchObject({ limit: 6.6, raised: told[1]!.id });
  expect(told[1]!.since! > told[0]!.t).toBe(true);
  expect(told[0]!.reason).toBe(
    'velocity overall above 4 mm/s for 30 s: zone C, ISO 10816-7 category I up to 200 kW',
  );
  for (let mmS = 8; mmS > 1; mmS -= 0.1) bench.read({ mmS });
  for (let i = 0; i < 8; i++) bench.read({ mmS: 1 });
  expect(brief(alarmsIn(bench.effects)).slice(2)).toEqual([
    'unacknowledged alert',
    'returned-unacknowledged alert',
  ]);
  expect(alarmsIn(bench.effects)[2]!.raised).toBe(told[1]!.id);
});

test('the payload has exactly the keys of the contract', () => {
  const bench = new Bench(onePoint());
  for (let i = 0; i < 4; i++) bench.read({ mmS: 7.123456 });
  const [alarm] = alarmsIn(bench.effects);
  const keys = 'id t state level value limit unit raised since acknowledged_by reason check snapshot'.split(
    ' ',
  );
  expect(Object.keys(alarm!)).toEqual(keys);
  expect(alarm!.value).toBe(7.123);
  const state = 'id t running since hours_run starts_today severity zone worst unacknowledged finding'.split(
    ' ',
  );
  expect(Object.keys(statesIn(bench.effects)[0]!)).toEqual(state);
});

test('flapping around the limit with each reading never outlasts the delay', () => {
  const bench = new Bench(onePoint());
  for (let i = 0; i < 500; i++) bench.read({ mmS: i % 2 === 0 ? 4.2 : 3.8 });
  expect(alarmsIn(bench.effects)).toEqual([]);
});

test('displacement decides where its table is the more severe one, and is the figure told', () => {
  const part3 = { table: 'iso-20816-3', group: 2, support: 'rigid' } as const;
  const points = [makePoint('pump-1', 'de-h', 'node-1', { severity: part3 })];
  const bench = new Bench(makeStation([makeMachine('pump-1', points)]));
  for (let i = 0; i < 4; i++) bench.read({ mmS: 2, um: 50 });
  // B/C of group 2 rigid is 45 µm and 2.8 mm/s (ISO 10816-3:2009 Table A.2).
  expect(alarmsIn(bench.effects)[0]).toMatchObject({ level: 'alert', value: 50, limit: 45, unit: 'µm' });
});

describe('a machine that stops and starts', () => {
  test('forty starts a day, over the limit whenever it runs: one alarm, raised once and never cleared', () => {
    const bench = new Bench(onePoint());
    for (let start = 0; start < 40; start++) {
      for (let i = 0; i < 12; i++) bench.read({ mmS: 5 });
      for (let i = 0; i < 24; i++) bench.read({ mmS: 0.05, running: false });
    }
    expect(brief(alarmsIn(bench.effects))).toEqual(['unacknowledged alert']);
    expect(journalIn(bench.effects)).toHaveLength(1);
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ starts_today: 39, running: false, severity: 1 });
  });

  test('forty starts a day, each with a hard start-up inside the start delay: nothing at all', () => {
    const bench = new Bench(onePoint());
    for (let start = 0; start < 40; start++) {
      bench.read({ mmS: 12 });
      bench.read({ mmS: 9 });
      for (let i = 0; i < 12; i++) bench.read({ mmS: 2 });
      for (let i = 0; i < 24; i++) bench.read({ mmS: 0.05, running: false });
    }
    // The first of them is no start that anybody saw: two readings over the limit are still short of the delay.
    expect(alarmsIn(bench.effects)).toEqual([]);
  });

  test('runs since it started, whatever was unknown in between', () => {
    const bench = new Bench(onePoint());
    const last = (mmS: number | null, running: boolean | null) => {
      // A minute and more, for state messages have a bound.
      for (let i = 0; i < 8; i++) bench.read({ mmS, running });
      return statesIn(bench.effects).at(-1);
    };
    last(0.05, false);
    const started = last(2, true);
    expect(last(null, null)).toMatchObject({ running: null });
    expect(last(2, true)).toMatchObject({ running: true, since: started?.since });
    last(null, null);
    const stopped = last(0.05, false);
    expect(stopped).toMatchObject({ running: false });
    expect(stopped?.since).not.toBe(started?.since);
  });

  test('runs shorter than the delay add up, since the delay counts running time', () => {
    const bench = new Bench(onePoint(undefined, { startDelayS: 0 }));
    const cycle = () => [
      ...bench.read({ mmS: 5 }),
      ...bench.read({ mmS: 5 }),
      ...bench.read({ mmS: 0.05, running: false }),
    ];
    // The first reading over the limit counts 0, then 10, 10 + 10 (the first of a run carries its interval), 10.
    expect(brief(alarmsIn([...cycle(), ...cycle(), ...cycle()]))).toEqual(['unacknowledged alert']);
  });

  test('the start delay counts from the first reading that says it runs', () => {
    const bench = new Bench(onePoint([{ ...zoneRule, onDelayS: 0 }]));
    bench.read({ mmS: 0.05, running: false });
    expect(alarmsIn([...bench.read({ mmS: 5 }), ...bench.read({ mmS: 5 })])).toEqual([]);
    expect(alarmsIn(bench.read({ mmS: 5 }))).toHaveLength(1);
  });

  test('an hour of standing still is suppression by design for what is normal, not for what stands', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
    for (let i = 0; i < 359; i++) bench.read({ mmS: 0, running: false });
    expect(bench.lifeOf('pump-1/de-h.bearing')).toBe('normal');
    bench.read({ mmS: 0, running: false });
    expect(bench.lifeOf('pump-1/de-h.bearing')).toBe('suppressed-by-design');
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    expect(bench.lifeOf('pump-1/de-h.sensor')).toBe('normal');
    for (let i = 0; i < 3; i++) bench.read({ mmS: 2 });
    expect(bench.lifeOf('pump-1/de-h.bearing')).toBe('normal');
  });

  test('a reading while it coasts down, or outside its range of speed, holds the timers', () => {
    const shaft = { kind: 'range', rpmRange: [700, 1500] } as const;
    const bench = new Bench(onePoint([{ ...zoneRule, onDelayS: 0 }], { shaft }));
    bench.read({ mmS: 2, shaftHz: 24 });
    expect(alarmsIn(bench.read({ mmS: 8, shaftHz: 20 }))).toEqual([]);
    expect(alarmsIn(bench.read({ mmS: 8, shaftHz: 10 }))).toEqual([]);
    expect(alarmsIn([...bench.read({ mmS: 8, shaftHz: 15 })])).toHaveLength(1);
  });
});

describe('rules', () => {
  test('three of the last five readings accuse the bearing; a missing envelope holds', () => {
    const bench = new Bench(onePoint([bearingRule]));
    const show = (...defects: ('outer' | null | undefined)[]) =>
      defects.flatMap((defect) => alarmsIn(bench.read(defect === undefined ? { mmS: null } : { defect })));
    expect(show('outer', null, 'outer', null, null, 'outer')).toEqual([]);
    const [alarm] = show('outer', undefined, 'outer');
    expect(alarm).toMatchObject({ state: 'unacknowledged', level: 'alert', value: 'outer', limit: null });
    expect(alarm!.reason).toBe('bearing lines of the envelope accuse outer in 3 of the last 5 readings');
    expect(show(null, null, null, null, null, null, null)).toEqual([]);
    expect(brief(show(null, null, null))).toEqual(['returned-unacknowledged alert']);
  });

  // Figures are published with four significant digits (the topics of the contract): 2.8003 is told as 2.8.
  test.each([
    ['above', 2.8, 2.8003, 2.8006],
    ['below', 2.8, 2.7997, 2.7994],
  ] as const)('%s %d: what is told as equal to the limit is not beyond it', (kind, alert, equal, beyond) => {
    const test = { kind, alert, danger: null };
    const bench = new Bench(onePoint([{ ...zoneRule, test, onDelayS: 0, offDelayS: 0 }]));
    expect(alarmsIn(bench.read({ mmS: equal }))).toEqual([]);
    expect(brief(alarmsIn(bench.read({ mmS: beyond })))).toEqual(['unacknowledged alert']);
  });

  test('a deadband ends where the published figure leaves it: 10 % under 2.8 mm/s is 2.52 mm/s', () => {
    const test = { kind: 'above', alert: 2.8, danger: null } as const;
    const bench = new Bench(onePoint([{ ...zoneRule, test, onDelayS: 0, offDelayS: 0 }]));
    bench.read({ mmS: 3 });
    expect(alarmsIn(bench.read({ mmS: 2.521 }))).toEqual([]);
    expect(brief(alarmsIn(bench.read({ mmS: 2.5203 })))).toEqual(['returned-unacknowledged alert']);
  });

  test('below', () => {
    const low = {
      ...zoneRule,
      id: 'low',
      test: { kind: 'below', alert: 1, danger: null } as const,
      onDelayS: 0,
    };
    const bench = new Bench(onePoint([low]));
    expect(alarmsIn(bench.read({ mmS: 1 }))).toEqual([]);
    expect(alarmsIn(bench.read({ mmS: 0.9 }))[0]).toMatchObject({ level: 'alert', limit: 1, value: 0.9 });
    // Deadband 10 %: it clears above 1.1.
    for (let i = 0; i < 10; i++) bench.read({ mmS: 1.05 });
    expect(bench.lifeOf('pump-1/de-h.low')).toBe('unacknowledged');
  });

  test('latched stays after the condition is over until it is acknowledged and reset', () => {
    const bench = new Bench(onePoint([{ ...zoneRule, latched: true }]));
    for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
    for (let i = 0; i < 20; i++) bench.read({ mmS: 1 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 1, unacknowledged: 1 });
    bench.put({ kind: 'acknowledge', alarm: 'pump-1/de-h.zone', by: 'ann', t: bench.t });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('acknowledged');
    bench.put({ kind: 'reset', alarm: 'pump-1/de-h.zone', by: 'ann', t: bench.t });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('normal');
  });

  test('zones ask for a table that applies at the place', () => {
    const points = [
      makePoint('pump-1', 'foot', 'node-1', { at: 'foot' }),
      makePoint('pump-1', 'axial', 'node-1', { direction: 'axial' }),
      makePoint('pump-1', 'thrust', 'node-1', { direction: 'axial', thrust: true }),
    ];
    const { plan } = new Bench(makeStation([makeMachine('pump-1', points)], [zoneRule]));
    expect([...plan.alarms.keys()].filter((key) => key.endsWith('.zone'))).toEqual(['pump-1/thrust.zone']);
  });
});

describe('sensors and links', () => {
  test('a flat line is an alarm of the sensor, also at rest, and makes the machine unknown', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 0.1, running: false });
    for (let i = 0; i < 3; i++) bench.read({ mmS: null, why: ['flat line: the counts never change'] });
    const [alarm] = alarmsIn(bench.effects, 'pump-1/alarm/de-h.sensor');
    expect(alarm).toMatchObject({ state: 'unacknowledged', level: 'alert' });
    expect(alarm!.reason).toContain('flat line');
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 3, worst: 'de-h' });
  });

  // Severity 3 is "no valid reading while running for three intervals" (the topics of the contract).
  test('one good reading makes the machine known again, while the alarm of its sensor still stands', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 2 });
    const flat = () => bench.read({ mmS: null, why: ['flat line: the counts never change'] });
    for (let i = 0; i < 3; i++) flat();
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 3, unacknowledged: 1 });
    bench.read({ mmS: 2 });
    expect(bench.lifeOf('pump-1/de-h.sensor')).toBe('unacknowledged');
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 0, unacknowledged: 1 });
  });

  test('a sensor that fails during an alarm neither clears nor hides it', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 4; i++) bench.read({ mmS: 7 });
    for (let i = 0; i < 200; i++) bench.read({ mmS: null, why: ['flat line: the counts never change'] });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('unacknowledged');
    // Danger outranks unknown.
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 2 });
    for (let i = 0; i < 20; i++) bench.read({ mmS: 1 });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('returned-unacknowledged');
    expect(bench.lifeOf('pump-1/de-h.sensor')).toBe('returned-unacknowledged');
  });

  test('hours without a figure are a fault, not suppression by design', () => {
    const bench = new Bench(onePoint());
    bench.read({ mmS: 2 });
    for (let i = 0; i < 800; i++) bench.read({ mmS: null, why: ['flat line: the counts never change'] });
    expect(bench.lifeOf('pump-1/de-h.zone')).toBe('normal');
    expect(bench.lifeOf('pump-1/de-h.sensor')).toBe('unacknowledged');
  });

  test('unknown outranks alert', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 4; i++) bench.read({ mmS: 5 });
    expect(statesIn(bench.effects).at(-1)!.severity).toBe(1);
    for (let i = 0; i < 3; i++) bench.read({ mmS: null, why: ['rate uncertain'] });
    expect(statesIn(bench.effects).at(-1)!.severity).toBe(3);
  });

  const node = () => {
    const points = ['h', 'v', 'a'].map((id) => makePoint('pump-1', id, 'node-1'));
    return new Bench(makeStation([makeMachine('pump-1', points)]));
  };
  const all = (shown: object) => ({ 'pump-1/h': shown, 'pump-1/v': shown, 'pump-1/a': shown });

  test('a node that is gone is one alarm, whichever way it shows, and its machine is unknown', () => {
    const bench = node();
    bench.read(all({ mmS: 2 }));
    const gone = (conditions: ('silent' | 'refused')[]) =>
      bench.put({ kind: 'link', link: 'node-1', conditions, detail: null, t: bench.t });
    gone(['silent']);
    bench.tick(10);
    gone(['silent', 'refused']);
    bench.tick(10);
    gone(['refused']);
    for (let i = 0; i < 20; i++) bench.tick(10);
    const told = bench.effects.flatMap((e) => (e.kind === 'publish' && e.class === 'alarm' ? [e.topic] : []));
    expect(told).toEqual(['agent/alarm/node-1.silent']);
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 3, running: null, zone: null });
    bench.put({ kind: 'link', link: 'node-1', conditions: [], detail: null, t: bench.t });
    for (let i = 0; i < 4; i++) bench.read(all({ mmS: 2 }));
    expect(bench.lifeOf('agent/node-1.silent')).toBe('returned-unacknowledged');
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 0, running: true });
  });

  test('a foreign node is an alarm of its own', () => {
    const bench = node();
    const conditions = ['foreign-node'] as const;
    const effects = bench.put({ kind: 'link', link: 'node-1', conditions, detail: 'node 8', t: bench.t });
    expect(alarmsIn(effects, 'agent/alarm/node-1.foreign-node')[0]!.reason).toContain('node 8');
  });

  test('lost samples on all channels are one alarm of the link', () => {
    const bench = node();
    for (let i = 0; i < 5; i++) bench.read(all({ mmS: null, why: ['gap: 12 samples missing'] }));
    expect(journalIn(bench.effects).map(({ key }) => key)).toEqual(['agent/node-1.gaps']);
  });

  test('sensor alarms go by most of the last readings: one knock is no fault', () => {
    const bench = new Bench(onePoint([sensorRule]));
    for (let i = 0; i < 50; i++) {
      const knock = i % 5 === 0 || i % 5 === 2;
      bench.read(
        knock ? { mmS: null, why: ['over-range: 3 samples at the limit of the converter'] } : { mmS: 2 },
      );
    }
    expect(alarmsIn(bench.effects)).toEqual([]);
  });
});

describe('links and gateway by the clock of the station', () => {
  test('a link that flaps is announced once; it returns when it has been well for half a minute', () => {
    const bench = new Bench(onePoint());
    const link = (conditions: ('silent' | 'refused')[]) =>
      bench.put({ kind: 'link', link: 'node-1', conditions, detail: null, t: bench.t });
    for (let i = 0; i < 20; i++) {
      link(i % 2 === 0 ? ['silent'] : []);
      bench.tick(10);
    }
    expect(brief(alarmsIn(bench.effects))).toEqual(['unacknowledged alert']);
    expect(brief(alarmsIn(bench.tick(10)))).toEqual([]);
    expect(brief(alarmsIn(bench.tick(10)))).toEqual(['returned-unacknowledged alert']);
  });

  test('a condition of the gateway is an alarm with its detail', () => {
    const bench = new Bench(onePoint());
    const put = (holds: boolean) =>
      bench.put({ kind: 'gateway', condition: 'database', holds, detail: 'moved to state/old', t: bench.t });
    const [alarm] = alarmsIn(put(true), 'agent/alarm/gateway.database');
    expect(alarm).toMatchObject({ state: 'unacknowledged', level: 'alert' });
    expect(alarm!.reason).toContain('(moved to state/old)');
    put(false);
    for (let i = 0; i < 3; i++) bench.tick(10);
    expect(bench.lifeOf('agent/gateway.database')).toBe('returned-unacknowledged');
  });

  test('a link that the station does not have is refused', () => {
    const bench = new Bench(onePoint());
    const put = () =>
      bench.put({ kind: 'link', link: 'node-9', conditions: ['silent'], detail: null, t: bench.t });
    expect(put).toThrow(/no link node-9/);
  });
});

describe('machine state', () => {
  test('hours run by sample time, starts by label of the day', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 360; i++) bench.read({ mmS: 2 });
    for (let i = 0; i < 10; i++) bench.read({ mmS: 0, running: false });
    bench.read({ mmS: 2 });
    expect(statesIn(bench.effects).at(-1)).toMatchObject({
      hours_run: 1,
      starts_today: 1,
      running: true,
      zone: 'A',
    });
    bench.seconds += 86_400;
    bench.read({ mmS: 2 });
    bench.tick(1);
    expect(statesIn(bench.effects).at(-1)!.starts_today).toBe(0);
  });

  test('two points of one machine do not count its hours twice, and one takes over from the other', () => {
    const points = ['h', 'v'].map((id) => makePoint('pump-1', id, 'node-1'));
    const bench = new Bench(makeStation([makeMachine('pump-1', points)]));
    for (let i = 0; i < 180; i++) bench.read({ 'pump-1/h': { mmS: 2 }, 'pump-1/v': { mmS: 2 } });
    for (let i = 0; i < 187; i++) bench.read({ 'pump-1/v': { mmS: 2 } });
    // Five rounds pass before the other takes over.
    expect(bench.state.machines['pump-1']!.runS).toBe(1800 + 1870 - 50);
  });

  test('is told on change and every hour', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 3 * 360; i++) bench.read({ mmS: 2 });
    expect(statesIn(bench.effects)).toHaveLength(3);
  });

  test('a shelved alarm does not count in it', () => {
    const bench = new Bench(onePoint());
    for (let i = 0; i < 4; i++) bench.read({ mmS: 7 });
    bench.put({ kind: 'shelve', alarm: 'pump-1/de-h.zone', minutes: 10, by: 'ann', t: bench.t });
    expect(statesIn(bench.effects).at(-1)).toMatchObject({ severity: 0, unacknowledged: 0, zone: 'D' });
  });
});

test('nothing is written while nothing happens, the hours aside', () => {
  const bench = new Bench(onePoint());
  for (let i = 0; i < 3; i++) bench.read({ mmS: 2 });
  const rows = bench.read({ mmS: 2 }).flatMap((effect) => (effect.kind === 'row' ? [effect] : []));
  expect(new Set(rows.map(({ key }) => key))).toEqual(new Set(['machine:pump-1', 'quiet:']));
  expect(rows.every(({ urgent }) => !urgent)).toBe(true);
});

test('evidence is asked for at the first reading over the limit, and kept or dropped', () => {
  const bench = new Bench(onePoint([zoneRule]));
  const what = (mmS: number) => bench.read({ mmS }).flatMap((e) => (e.kind === 'evidence' ? [e.what] : []));
  expect([what(5), what(2), what(5), what(5), what(5), what(5), what(5)]).toEqual([
    ['begin'],
    ['drop'],
    ['begin'],
    [],
    [],
    ['keep'],
    [],
  ]);
});

test('evidence of what comes and goes on the shelf is dropped', () => {
  const bench = new Bench(onePoint([zoneRule]));
  bench.read({ mmS: 1 });
  bench.put({ kind: 'shelve', alarm: 'pump-1/de-h.zone', minutes: 60, by: 'ann', t: bench.t });
  const what = (mmS: number, times: number) =>
    Array.from({ length: times }, () => bench.read({ mmS }))
      .flat()
      .flatMap((e) => (e.kind === 'evidence' ? [e.what] : []));
  expect(what(8, 10)).toEqual(['begin']);
  expect(what(1, 10)).toEqual(['drop']);
});

test('a point that the station does not have is refused', () => {
  const bench = new Bench(onePoint());
  expect(() => bench.read({ 'pump-9/x': { mmS: 1 } })).toThrow(/no point pump-9\/x/);
});
