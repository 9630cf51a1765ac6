import { dayWords } from './clock';
import type { Run } from './runs';

/** A stretch of a day, 0 midnight, 1 the next. */
export interface Bar {
  id: number;
  from: number;
  to: number;
}

/** The runs begun on one day here, the newest first, and all that was recorded on it. */
export interface Day {
  words: string;
  runs: Run[];
  bars: Bar[];
}

/** `runs`: the newest first. */
export function daysOf(runs: readonly Run[]): Day[] {
  const days = new Map<number, Run[]>();
  for (const run of runs) {
    const midnight_ms = midnightBefore(Date.parse(run.started_utc));
    days.set(midnight_ms, [...(days.get(midnight_ms) ?? []), run]);
  }
  return [...days].map(([midnight_ms, begun]) => ({
    words: dayWords(new Date(midnight_ms)),
    runs: begun,
    bars: barsOf(runs, midnight_ms),
  }));
}

function midnightBefore(at_ms: number): number {
  return new Date(at_ms).setHours(0, 0, 0, 0);
}

function barsOf(runs: readonly Run[], midnight_ms: number): Bar[] {
  const next = new Date(midnight_ms);
  next.setDate(next.getDate() + 1); // 23 or 25 hours where the clock is changed
  const share = (at_ms: number): number =>
    Math.min(1, Math.max(0, (at_ms - midnight_ms) / (next.getTime() - midnight_ms)));
  return runs
    .map((run) => {
      const start_ms = Date.parse(run.started_utc);
      const end_ms = start_ms + 1000 * run.duration_s;
      return { id: run.id, from: share(start_ms), to: share(end_ms), start_ms, end_ms };
    })
    .filter((bar) => bar.end_ms >= midnight_ms && bar.start_ms < next.getTime())
    .map(({ id, from, to }) => ({ id, from, to }));
}
