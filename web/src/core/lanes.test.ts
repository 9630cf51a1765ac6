import { describe, expect, it } from 'vitest';
import { Columns } from './columns';
import { fieldPlace } from './field';
import { agoWords, LaneMaker, LANES_TOP, timeMarks } from './lanes';
import { readings } from './samples';

describe('lanes', () => {
  const place = fieldPlace('arcsec', null);

  it('keep X above Y and inside the strip, and null as null', () => {
    const columns = new Columns(100);
    columns.append(readings([1, 2, 3, 4, 5, 6]), 1);
    columns.push(
      { seq: 7, t_s: 0.7, x_arcsec: null, y_arcsec: null, x_px: null, y_px: null, good: false },
      1,
    );
    const { data } = new LaneMaker().make(columns, place, 0, 1, 0.01, 1);
    const [, xs = [], ys = []] = data;
    expect(xs.at(-1)).toBeNull();
    for (let i = 0; i < 6; i++) {
      expect(xs[i]).toBeGreaterThan(1);
      expect(xs[i]).toBeLessThan(LANES_TOP);
      expect(ys[i]).toBeGreaterThan(0);
      expect(ys[i]).toBeLessThan(1);
    }
    expect((xs[1] ?? 0) - (xs[0] ?? 0)).toBeCloseTo((ys[0] ?? 0) - (ys[1] ?? 0), 9);
  });

  it('names each stretch without a reading, also an open one at the end', () => {
    const columns = new Columns(100);
    columns.append(readings([1, 2]), 0.5);
    columns.append(readings([40, 41]), 0.5);
    const { gaps } = new LaneMaker().make(columns, place, 0, 9.1, 0.01, 9.1);
    expect(gaps).toEqual([
      { from_s: 0.2, to_s: 4, missing: 'reading' },
      { from_s: 4.1000000000000005, to_s: 9.1, missing: 'reading' },
    ]);
  });

  it('have no scale beside nothing', () => {
    const columns = new Columns(100);
    const row = { x_arcsec: null, y_arcsec: null, x_px: null, y_px: null, good: false };
    for (const seq of [0, 1, 2]) columns.push({ ...row, seq, t_s: seq }, 5);
    const pixels = fieldPlace('px', null);
    expect(new LaneMaker().make(columns, pixels, 0, 2, 0, 2).marks).toEqual([]);
    columns.push({ ...row, seq: 3, t_s: 3, x_px: 300, y_px: 200 }, 5);
    expect(new LaneMaker().make(columns, pixels, 0, 3, 0, 3).marks).not.toEqual([]);
  });

  it('tells a missing scale from a missing reading', () => {
    const columns = new Columns(100);
    const row = { x_arcsec: null, y_arcsec: null, good: false };
    for (const seq of [0, 1, 2]) columns.push({ ...row, seq, t_s: seq, x_px: 3, y_px: 4 }, 5);
    for (const seq of [3, 4]) columns.push({ ...row, seq, t_s: seq, x_px: null, y_px: null }, 5);
    columns.append(readings([50, 51]), 5);
    const { gaps } = new LaneMaker().make(columns, place, 0, 5.1, 0.01, 5.1);
    expect(gaps).toEqual([
      { from_s: 0, to_s: 2, missing: 'scale' },
      { from_s: 2, to_s: 5, missing: 'reading' },
    ]);
  });

  it('does not call the time after the last row one without a scale', () => {
    const columns = new Columns(100);
    columns.push(
      { seq: 1, t_s: 1, x_arcsec: null, y_arcsec: null, x_px: 3, y_px: 4, good: false },
      5,
    );
    columns.push(
      { seq: 2, t_s: 2, x_arcsec: null, y_arcsec: null, x_px: 3, y_px: 4, good: false },
      5,
    );
    const { gaps } = new LaneMaker().make(columns, place, 0, 9, 0.01, 9);
    expect(gaps).toEqual([
      { from_s: 1, to_s: 2, missing: 'scale' },
      { from_s: 2, to_s: 9, missing: 'reading' },
    ]);
  });

  it('count time back from now while following, and by round times of the clock else', () => {
    const following = timeMarks(100.3, 130.3, 6, true);
    expect(following.map((mark) => agoWords(mark.ago_s, 30, 'now'))).toEqual([
      '−30 s',
      '−25 s',
      '−20 s',
      '−15 s',
      '−10 s',
      '−5 s',
      'now',
    ]);
    expect(timeMarks(100.3, 130.3, 6, false).map((mark) => mark.at_s)).toEqual([
      105, 110, 115, 120, 125, 130,
    ]);
    expect(agoWords(240, 600, 'now')).toBe('−4 min');
  });
});
