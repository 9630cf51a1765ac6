import type { SourceEvent } from './protocol';

/** The service's word for an event, as people say it. */
export function eventWord(event: string): string {
  return EVENTS[event] ?? event.replaceAll('_', ' ');
}

const EVENTS: Record<string, string> = {
  calibration: 'new scale',
  run_started: 'run begins',
  run_stopped: 'run ends',
  log_failed: 'log failed',
  optics: 'optics changed',
};

/**
 * The events, the newest first, with one more. The service sends the last ones again to a page that
 * comes back: what is here already stays once. Of the same line over and over the last one stands.
 */
export function withEvent(
  events: readonly SourceEvent[],
  event: SourceEvent,
  most: number,
): readonly SourceEvent[] {
  if (events.some((known) => known.t_utc === event.t_utc && known.text === event.text)) {
    return events;
  }
  const at = events.findIndex((known) => known.t_utc <= event.t_utc);
  const later = at < 0 ? events : events.slice(0, at);
  const before = at < 0 ? [] : events.slice(at);
  const repeated = before[0]?.event === event.event && before[0].text === event.text;
  return [...later, event, ...before.slice(repeated ? 1 : 0)].slice(0, most);
}

/** The event that says a run could not be written any more, while no other has begun since. */
export function brokenOff(events: readonly SourceEvent[]): SourceEvent | null {
  const begun = events.findIndex((event) => event.event === 'run_started');
  const since = begun < 0 ? events : events.slice(0, begun);
  return since.find((event) => event.event === 'log_failed') ?? null;
}
