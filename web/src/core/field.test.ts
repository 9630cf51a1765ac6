import { describe, expect, it } from 'vitest';
import { Columns } from './columns';
import { fieldPlace, inkOf, strokesOf } from './field';
import { readings } from './samples';

describe('the trail', () => {
  it('has the newest row, gaps, and not more points than can be seen', () => {
    const columns = new Columns(1000);
    for (let n = 0; n < 6000; n++) columns.append(readings([n], 0.01), 1);
    const ink = inkOf(columns, fieldPlace('arcsec', null), 0, 60);
    expect(ink.t_s.at(-1)).toBeCloseTo(59.99, 9);
    expect(ink.t_s.length).toBeLessThanOrEqual(1802);
    expect(ink.t_s.length).toBeGreaterThan(300);
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
