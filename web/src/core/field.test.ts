import { describe, expect, it } from 'vitest';
import { Columns } from './columns';
import { fieldPlace, inkOf, strokesOf } from './field';
import { readings } from './samples';

describe('the trail', () => {
  it('has the newest row, gaps, and not more points than can be seen', () => {
    const columns = new Columns(1000);
    for (let n = 0; n < 6000; n++) columns.append(readings([n], 0.01), 1);
    const ink = inkOf(columns, fieldPlace('arcsec', null), 0, 60, 1);
    expect(ink.t_s.at(-1)).toBeCloseTo(59.99, 9);
    expect(ink.t_s.length).toBeLessThanOrEqual(1802);
    expect(ink.t_s.length).toBeGreaterThan(300);
  });

  it('goes where the averaged value goes', () => {
    // X is the row's number, ten rows a second: the mean of the last second lies 4.5 rows back.
    const columns = new Columns(1000);
    for (let n = 0; n < 900; n++) columns.append(readings([n]), 1);
    const ink = inkOf(columns, fieldPlace('arcsec', null), 30, 89.95, 0.95);
    expect(ink.x.at(-1)).toBeCloseTo(899 - 4.5, 9);
    expect(ink.x[0]).toBeCloseTo(300 - 4.5, 9);
    expect(ink.y.at(-1)).toBeCloseTo(-(899 - 4.5), 9);
  });

  it('leaves doubtful readings out of the mean, but shows one alone', () => {
    const columns = new Columns(1000);
    columns.append({ ...readings([0, 1]), quality: [['dim'], ['dim']] }, 1);
    const doubtful = inkOf(columns, fieldPlace('arcsec', null), 0, 1, 1);
    expect(doubtful.x).toEqual([0, 1]);
    columns.append(readings([2]), 1);
    expect(inkOf(columns, fieldPlace('arcsec', null), 0, 1, 1).x.at(-1)).toBe(2);
  });
});

describe('the strokes', () => {
  const same = (v: number): number => v;

  it('begin where those before end', () => {
    const ink = { t_s: [0, 5, 9.5, 10], x: [0, 1, 2, 3], y: [0, 0, 0, 0] };
    const strokes = strokesOf(ink, 0, 10, same, same);
    expect(strokes[0]).toBe('M0.0 0.0');
    expect(strokes[5]).toBe('M0.0 0.0L1.0 0.0');
    expect(strokes[9]).toBe('M1.0 0.0L2.0 0.0L3.0 0.0');
  });

  it('do not bridge a gap', () => {
    const ink = { t_s: [9.1, 9.2, 9.3], x: [0, null, 2], y: [0, null, 0] };
    expect(strokesOf(ink, 0, 10, same, same)[9]).toBe('M0.0 0.0M2.0 0.0');
  });
});

describe('a place in the field', () => {
  const zero = { x_arcsec: 5, y_arcsec: -5, x_sd_arcsec: 0, y_sd_arcsec: 0, n: 1, set_utc: '' };

  it('counts from the zero, tilts upwards and pixel rows downwards', () => {
    const tilt = fieldPlace('arcsec', zero);
    expect([tilt.x(7), tilt.y(-4), tilt.yDown]).toEqual([2, 1, false]);
    const pixel = fieldPlace('px', zero);
    expect([pixel.x(7), pixel.y(4), pixel.yDown]).toEqual([7, 4, true]);
  });
});
