import { describe, expect, it } from 'vitest';
import { HealthSchedule } from '../../src/station/health-schedule.ts';

/** Seconds at which it was sent. */
function sentAt(
  seconds: number,
  { changes = [], errors = () => 0 }: { changes?: number[]; errors?: (second: number) => number },
): number[] {
  const schedule = new HealthSchedule(0);
  const sent: number[] = [];
  for (let second = 0; second <= seconds; second++) {
    if (changes.includes(second)) schedule.changed(second);
    if (schedule.isDue(second, errors(second))) sent.push(second);
  }
  return sent;
}

describe('HealthSchedule', () => {
  it('sends at first and every six hours', () => {
    expect(sentAt(50_000, {})).toEqual([30, 21_630, 43_230]);
  });

  it('sends soon after a change, and again when it is over, a minute apart', () => {
    expect(sentAt(500, { changes: [200, 210, 400] })).toEqual([30, 205, 265, 405]);
    expect(sentAt(500, { changes: [200, 208] })).toEqual([30, 205, 265]);
    expect(sentAt(100, { changes: [2] })).toEqual([7]);
  });

  it('tells errors that merely grow, ten minutes apart', () => {
    const growing = (second: number) => (second < 100 ? 0 : Math.floor(second / 10));
    expect(sentAt(2000, { errors: growing })).toEqual([30, 635, 1240, 1845]);
    expect(sentAt(5000, { errors: (second) => (second < 100 ? 0 : 3) })).toEqual([30, 635]);
  });

  it('tells errors that grow after a link with many has left', () => {
    const errors = (second: number) => (second < 100 ? 50 : second < 1000 ? 0 : 3);
    expect(sentAt(2000, { errors })).toEqual([30, 1005]);
  });

  it('is bounded, however much changes', () => {
    const changes = Array.from({ length: 21_000 }, (_, second) => second);
    const sent = sentAt(21_000, { changes });
    expect(sent.length).toBeLessThanOrEqual(13);
    expect(sent.length).toBeGreaterThan(5);
  });
});
