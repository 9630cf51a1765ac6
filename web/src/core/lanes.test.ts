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
      [0.2, 4],
      [4.1000000000000005, 9.1],
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
