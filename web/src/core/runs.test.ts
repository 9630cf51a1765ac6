import { describe, expect, it } from 'vitest';
import { dayWillTake, nameOf, runsOf, seriesOf, wholeRunOf } from './runs';

const RUN = {
  id: 3,
  title: 'bed, line 1',
  note: '',
  source: 'simulated',
  started_utc: '2026-12-01T09:00:00.000Z',
  ended_utc: null,
  ending: null,
  every_s: 0,
  readings: 12,
  duration_s: null,
  version: '0.1.0',
};

describe('what the log answers', () => {
  it('is read, an empty run too', () => {
    expect(runsOf([RUN])[0]).toMatchObject({ id: 3, ended_utc: null, duration_s: 0 });
  });

  it('names what is wrong', () => {
    expect(() => runsOf({})).toThrow('the list of runs is not a list');
    expect(() => runsOf([{ ...RUN, every_s: 'all' }])).toThrow('every_s is not a number');
    expect(() => seriesOf({ bin_s: 1, t_s: [null] })).toThrow('t_s is not a number');
  });

  it('carries calibrations and events', () => {
    const whole = wholeRunOf({
      ...RUN,
      calibrations: [
        { from_seq: 4, calibration: { id: 'a', method: 'nominal', signs: 'proven', focal_length_mm: 300 } },
      ],
      events: [{ t_utc: RUN.started_utc, t_s: 0.5, event: 'stalled', text: 'no frames' }],
    });
    expect(whole.calibrations).toEqual([
      { id: 'a', method: 'nominal', signs: 'proven', focal_length_mm: 300 },
    ]);
    expect(whole.events[0]?.t_s).toBe(0.5);
  });
});

describe('a run in words', () => {
  it('has a name without a title', () => {
    expect(nameOf({ id: 7, title: '' })).toBe('run 7');
  });

  it('says what a day takes, at 95 bytes a row at most', () => {
    // 30 a second: 2 592 000 rows, 246 MB; every minute: 1440 rows, 0.137 MB.
    expect(dayWillTake(0, 30)).toBe('2.6 million rows, 250 MB a day');
    expect(dayWillTake(60, 30)).toBe('1\u2009400 rows, 0.14 MB a day');
  });
});
