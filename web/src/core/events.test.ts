import { describe, expect, it } from 'vitest';
import { brokenOff, eventWord, withEvent } from './events';
import type { SourceEvent } from './protocol';

function at(second: number, text = `at ${second}`): SourceEvent {
  const t_utc = `2026-12-01T09:00:${String(second).padStart(2, '0')}.000Z`;
  return { kind: 'event', t_s: second, t_utc, event: 'note', text };
}

const all = (events: SourceEvent[]): readonly SourceEvent[] =>
  events.reduce<readonly SourceEvent[]>((known, event) => withEvent(known, event, 4), []);

describe('events', () => {
  it('stand once, the newest first, however often they are sent', () => {
    const sent = [at(1), at(2), at(3)];
    expect(all([...sent, ...sent, at(4)]).map((event) => event.t_s)).toEqual([4, 3, 2, 1]);
  });

  it('find their place when they come late', () => {
    expect(all([at(1), at(5), at(3)]).map((event) => event.t_s)).toEqual([5, 3, 1]);
  });

  it('do not repeat a line', () => {
    expect(all([at(1), at(2, 'same'), at(3, 'same')]).map((event) => event.t_s)).toEqual([3, 1]);
  });

  it('let the oldest go', () => {
    expect(all([at(1), at(2), at(3), at(4), at(5)]).map((event) => event.t_s)).toEqual([5, 4, 3, 2]);
  });

  it('tell of a run that broke off until another one begins', () => {
    const failed = { ...at(2), event: 'log_failed' };
    const begun = { ...at(1), event: 'run_started' };
    expect(brokenOff([begun])).toBeNull();
    expect(brokenOff([at(3), failed, begun])).toBe(failed);
    expect(brokenOff([{ ...at(4), event: 'run_started' }, failed, begun])).toBeNull();
  });

  it('have words for people, also unknown ones', () => {
    expect(eventWord('run_started')).toBe('run begins');
    expect(eventWord('not_yet_known')).toBe('not yet known');
  });
});
