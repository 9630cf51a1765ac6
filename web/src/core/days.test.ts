import { describe, expect, it } from 'vitest';
import { daysOf } from './days';
import type { Run } from './runs';

function run(id: number, started: Date, duration_s: number): Run {
  return {
    id,
    title: '',
    note: '',
    source: '',
    started_utc: started.toISOString(),
    ended_utc: null,
    ending: null,
    every_s: 0,
    readings: 1,
    duration_s,
  };
}

describe('the days of the log', () => {
  // Winter days without a change of the clock anywhere: 24 hours each.
  const runs = [
    run(3, new Date(2026, 11, 2, 12), 3600),
    run(2, new Date(2026, 11, 1, 18), 12 * 3600),
    run(1, new Date(2026, 11, 1, 6), 60),
  ];

  it('hold the runs begun on them, in order', () => {
    const days = daysOf(runs);
    expect(days.map((day) => day.words)).toEqual(['Wed 2 Dec 2026', 'Tue 1 Dec 2026']);
    expect(days.map((day) => day.runs.map((r) => r.id))).toEqual([[3], [2, 1]]);
  });

  it('show a night on both', () => {
    const [second, first] = daysOf(runs);
    expect(first?.bars).toEqual([
      { id: 2, from: 0.75, to: 1 },
      { id: 1, from: 0.25, to: 0.25 + 60 / 86_400 },
    ]);
    expect(second?.bars).toEqual([
      { id: 3, from: 0.5, to: 0.5 + 1 / 24 },
      { id: 2, from: 0, to: 0.25 },
    ]);
  });
});
