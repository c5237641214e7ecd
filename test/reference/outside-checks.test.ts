import { describe, expect, it } from 'vitest';
import { allChecks } from './all-checks.ts';
import { runCheck, signalChecks } from './outside-checks.ts';

describe('figures from outside', () => {
  it.each(allChecks.map((check) => [check.id, check] as const))('%s', (_, check) => {
    const { passed, line } = runCheck(check);
    expect(passed, line).toBe(true);
  });

  it('have an id each, a source and a tolerance', () => {
    expect(new Set(allChecks.map((c) => c.id)).size).toBe(allChecks.length);
    expect(allChecks.length).toBeGreaterThanOrEqual(200);
    for (const { source, tolerance } of allChecks) {
      expect(source.length).toBeGreaterThan(10);
      expect(tolerance).toBeGreaterThanOrEqual(0);
    }
  });

  it('fail when the figure is not a number or off by more than the tolerance', () => {
    const check = { ...signalChecks[0]!, value: 1, tolerance: 0.1 };
    expect(runCheck({ ...check, measure: () => 1.11 }).passed).toBe(false);
    expect(runCheck({ ...check, measure: () => Number.NaN }).passed).toBe(false);
    expect(runCheck({ ...check, measure: () => 0.91 })).toMatchObject({ passed: true, measured: 0.91 });
    expect(runCheck({ ...check, measure: () => 1.11 }).line).toMatch(
      /^FAIL window\.rectangular\.gain: 1\.11, expected 1 ± 0\.1 \(/,
    );
  });
});
