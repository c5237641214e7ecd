import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { type LifeInput, type LifeState, NORMAL, stepLife } from '../../src/alarm/life-cycle.ts';

const on = (level: 'alert' | 'danger'): LifeInput => ({ kind: 'condition-on', level });
const inputs: Record<string, LifeInput> = {
  alert: on('alert'),
  danger: on('danger'),
  off: { kind: 'condition-off' },
  acknowledge: { kind: 'acknowledge' },
  reset: { kind: 'reset' },
  shelve: { kind: 'withhold', why: 'shelved' },
  unshelve: { kind: 'restore', why: 'shelved' },
  suppress: { kind: 'withhold', why: 'suppressed-by-design' },
  unsuppress: { kind: 'restore', why: 'suppressed-by-design' },
  out: { kind: 'withhold', why: 'out-of-service' },
  in: { kind: 'restore', why: 'out-of-service' },
};

const withheld = (
  state: 'shelved' | 'suppressed-by-design' | 'out-of-service',
  condition: 'alert' | null,
): LifeState => ({
  state,
  condition,
  withheld: [state],
  latched: null,
});

const starts: Record<string, LifeState> = {
  normal: NORMAL,
  unacknowledged: { state: 'unacknowledged', level: 'alert', condition: 'alert' },
  acknowledged: { state: 'acknowledged', level: 'alert', condition: 'alert' },
  returned: { state: 'returned-unacknowledged', level: 'alert' },
  'shelved off': withheld('shelved', null),
  'shelved on': withheld('shelved', 'alert'),
  'suppressed off': withheld('suppressed-by-design', null),
  'suppressed on': withheld('suppressed-by-design', 'alert'),
  'out off': withheld('out-of-service', null),
  'out on': withheld('out-of-service', 'alert'),
};

/** Short forms: N, U, A, R, Sh, Su, O; `!` announces, `.` nothing changes. Level of U, A, R is alert unless it ends in d. */
const columns = [
  'alert',
  'danger',
  'off',
  'acknowledge',
  'reset',
  'shelve',
  'unshelve',
  'suppress',
  'unsuppress',
  'out',
  'in',
];
const table: Record<string, string> = {
  normal: '         U!  Ud!  .   .  .  Sh  .   Su  .   O   . ',
  unacknowledged: ' .   Ud!  R   A  .  Sh  .   Su  .   O   . ',
  acknowledged: '   .   Ud!  N   .  .  Sh  .   Su  .   O   . ',
  returned: '       U!  Ud!  .   N  .  Sh  .   Su  .   O   . ',
  'shelved off': '  Sh  Sh   .   .  .  .   N   .   .   O   . ',
  'shelved on': '   .   Sh   Sh  .  .  .   U!  .   .   O   . ',
  'suppressed off': 'Su Su   .   .  .  Sh  .   .   N   O   . ',
  'suppressed on': ' .  Su   Su  .  .  Sh  .   .   U!  O   . ',
  'out off': '      O   O    .   .  .  .   .   .   .   .   N ',
  'out on': '       .   O    O   .  .  .   .   .   .   .   U!',
};
const short: Record<LifeState['state'], string> = {
  normal: 'N',
  unacknowledged: 'U',
  acknowledged: 'A',
  'returned-unacknowledged': 'R',
  shelved: 'Sh',
  'suppressed-by-design': 'Su',
  'out-of-service': 'O',
};

// Source: ISA-18.2 / IEC 62682 states and transitions, as listed in agreeing reproductions; alert to danger is ours.
describe('every state and every input, without latching', () => {
  const cases = Object.entries(table).flatMap(([from, row]) =>
    row
      .trim()
      .split(/\s+/)
      .map((expected, i) => [from, columns[i]!, expected] as const),
  );
  test('the table is complete', () => {
    expect(cases).toHaveLength(Object.keys(starts).length * Object.keys(inputs).length);
  });
  test.each(cases)('%s, %s: %s', (from, input, expected) => {
    const step = stepLife(starts[from]!, inputs[input]!, false);
    if (expected === '.') {
      expect(step.changed).toBe(false);
      expect(step.state.state).toBe(starts[from]!.state);
      expect(step.announced).toBe(false);
      return;
    }
    expect(step.changed).toBe(true);
    const danger = 'level' in step.state && step.state.level === 'danger' ? 'd' : '';
    expect(`${short[step.state.state]}${danger}${step.announced ? '!' : ''}`).toBe(expected);
  });
});

describe('levels', () => {
  test('danger to alert is told and not announced, and back to danger is announced', () => {
    const danger = stepLife(stepLife(NORMAL, on('danger'), false).state, inputs.acknowledge!, false).state;
    const down = stepLife(danger, on('alert'), false);
    expect(down).toEqual({
      state: { state: 'acknowledged', level: 'alert', condition: 'alert' },
      changed: true,
      announced: false,
    });
    expect(stepLife(down.state, on('danger'), false).announced).toBe(true);
  });
});

describe('latched', () => {
  const run = (names: string[]) =>
    names.reduce<LifeState>((state, name) => stepLife(state, inputs[name]!, true).state, NORMAL);
  test.each([
    [['alert', 'off'], 'unacknowledged'],
    [['alert', 'off', 'acknowledge'], 'acknowledged'],
    [['alert', 'acknowledge', 'off'], 'acknowledged'],
    [['alert', 'off', 'acknowledge', 'reset'], 'normal'],
    [['alert', 'off', 'reset'], 'returned-unacknowledged'],
    [['alert', 'acknowledge', 'reset'], 'acknowledged'],
    [['alert', 'acknowledge', 'off', 'shelve', 'unshelve'], 'unacknowledged'],
    [
      ['normal-shelved', 'alert', 'off', 'unshelve'].map((n) => (n === 'normal-shelved' ? 'shelve' : n)),
      'unacknowledged',
    ],
    [['alert', 'off', 'shelve', 'reset', 'unshelve'], 'normal'],
  ])('%j ends %s', (names, state) => {
    expect(run(names).state).toBe(state);
  });
  test('keeps its worst level', () => {
    const step = stepLife(run(['danger', 'acknowledge']), inputs.alert!, true);
    expect(step).toEqual({
      state: { state: 'acknowledged', level: 'danger', condition: 'alert' },
      changed: false,
      announced: false,
    });
  });
});

describe('withholdings that overlap', () => {
  const run = (names: string[]) =>
    names.reduce<LifeState>((state, name) => stepLife(state, inputs[name]!, false).state, NORMAL);
  test.each([
    [['shelve', 'suppress', 'unshelve'], 'suppressed-by-design'],
    [['suppress', 'shelve', 'out', 'in'], 'shelved'],
    [['suppress', 'shelve', 'out', 'in', 'unshelve', 'unsuppress'], 'normal'],
    [['out', 'shelve', 'in', 'alert', 'unshelve'], 'unacknowledged'],
  ])('%j ends %s', (names, state) => {
    expect(run(names).state).toBe(state);
  });
});

// The plain model: independent flags, and the state read off them.
test('random sequences agree with a plain model of flags', () => {
  const names = Object.keys(inputs);
  fc.assert(
    fc.property(fc.array(fc.constantFrom(...names), { maxLength: 60 }), (sequence) => {
      let life: LifeState = NORMAL;
      let condition: 'alert' | 'danger' | null = null;
      let open = false;
      const flags = new Set<string>();
      for (const name of sequence) {
        const before = condition;
        if (name === 'alert' || name === 'danger') condition = name;
        if (name === 'off') condition = null;
        const wasWithheld = flags.size > 0;
        if (name === 'shelve' || name === 'suppress' || name === 'out') flags.add(name);
        flags.delete({ unshelve: 'shelve', unsuppress: 'suppress', in: 'out' }[name] ?? '');
        const isWithheld = flags.size > 0;
        if (isWithheld) open = false;
        else if (wasWithheld) open = condition !== null;
        else if (condition !== null && (before === null || (condition === 'danger' && before === 'alert')))
          open = true;
        else if (name === 'acknowledge') open = false;
        life = stepLife(life, inputs[name]!, false).state;
        const expected = flags.has('out')
          ? 'out-of-service'
          : flags.has('shelve')
            ? 'shelved'
            : flags.has('suppress')
              ? 'suppressed-by-design'
              : condition === null
                ? open
                  ? 'returned-unacknowledged'
                  : 'normal'
                : open
                  ? 'unacknowledged'
                  : 'acknowledged';
        expect(life.state).toBe(expected);
      }
    }),
    { seed: 20260302, numRuns: 2000 },
  );
});
