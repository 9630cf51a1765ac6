import { ticks } from './scale';

/** Steps people count the time of day in. */
const STEPS_S = [
  0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60, 120, 300, 600, 900, 1800, 3600, 7200, 10_800, 21_600,
  43_200, 86_400, 172_800, 432_000,
];
const DAY_S = 86_400;

export interface TimeMark {
  at_s: number;
  text: string;
}

/**
 * Marks on round times of the day here, at most about `most` of them, between two times counted
 * from `start_ms`; a midnight is named by its date. `ahead_min`: how far the clock here is ahead
 * of UTC.
 */
export function clockMarks(
  start_ms: number,
  from_s: number,
  to_s: number,
  most: number,
  ahead_min = -new Date(start_ms + 1000 * from_s).getTimezoneOffset(),
): TimeMark[] {
  const least_s = (to_s - from_s) / Math.max(1, most);
  const step_s =
    STEPS_S.find((step) => step >= least_s * (1 - 1e-9)) ?? DAY_S * Math.ceil(least_s / DAY_S);
  const origin_s = start_ms / 1000 + 60 * ahead_min;
  return ticks(origin_s + from_s, origin_s + to_s, step_s).map((clock_s) => ({
    at_s: clock_s - origin_s,
    text: words(clock_s, step_s),
  }));
}

/** The clock here is read as if it were UTC, so that no other clock comes in. */
function words(clock_s: number, step_s: number): string {
  const at = new Date(Math.round(1000 * clock_s));
  const [date = '', time = ''] = at.toISOString().split('T');
  if (step_s >= DAY_S || (step_s >= 60 && time.startsWith('00:00:00'))) {
    const month = at.toLocaleDateString('en-GB', { month: 'short', timeZone: 'UTC' });
    return `${Number(date.slice(8))} ${month}`;
  }
  if (step_s >= 60) return time.slice(0, 5);
  return step_s >= 1 ? time.slice(0, 8) : time.slice(0, 10);
}
