import { describe, expect, it } from 'vitest';
import type { Average, Newest, Zero } from './protocol';
import { shownAngle, shownPosition } from './shown';

const newest: Newest = {
  x_arcsec: 10.5,
  y_arcsec: -3,
  x_sd_arcsec: 0.3,
  y_sd_arcsec: 0.3,
  x_u_arcsec: 0.5,
  y_u_arcsec: 0.5,
  x_rel_u_arcsec: null,
  y_rel_u_arcsec: null,
  x_px: 320,
  y_px: 240,
  quality: [],
};
const average: Average = {
  x_arcsec: 10,
  y_arcsec: -3.2,
  x_se_arcsec: 0.05,
  y_se_arcsec: 0.05,
  n: 30,
  window_s: 1,
  statistic: 'mean',
};
const zero: Zero = {
  x_arcsec: 4,
  y_arcsec: -1,
  x_sd_arcsec: 0.03,
  y_sd_arcsec: 0.03,
  n: 30,
  set_utc: '',
};

describe('the number shown', () => {
  it('is the average, with its noise and its combined uncertainty', () => {
    const shown = shownAngle(average, newest, null, 'arcsec');
    expect(shown.x.value).toBe(10);
    expect(shown.basisWords).toBe('mean of 1.0 s');
    expect(shown.x.noise).toBe(0.05);
    // Common share 0.5^2 - 0.3^2 = 0.4^2, not averaged down; JCGM 100:2008, 5.1.2.
    expect(shown.x.u).toBeCloseTo(Math.hypot(0.4, 0.05), 12);
  });

  it('is one reading alone, said so, where there is no average', () => {
    const shown = shownAngle(
      { ...average, x_arcsec: null, y_arcsec: null },
      { ...newest, quality: ['unlocked'] },
      null,
      'arcsec',
    );
    expect(shown.basis).toBe('single');
    expect(shown.x.value).toBe(10.5);
    expect(shown.x.u).toBeCloseTo(0.5, 12);
    expect(shown.quality).toEqual(['unlocked']);
  });

  it('is nothing where nothing was measured, never the last value', () => {
    const none = { ...newest, x_arcsec: null, y_arcsec: null, quality: ['no_image'] };
    const shown = shownAngle(null, none, null, 'arcsec');
    expect(shown.basis).toBe('none');
    expect(shown.x).toEqual({ value: null, noise: null, u: null });
    expect(shown.x_arcsec).toBeNull();
  });

  it('counts from the zero, with its uncertainty', () => {
    // Of the difference: common share and zero 0.07, noise of the row 0.3.
    const row = { ...newest, x_rel_u_arcsec: Math.hypot(0.07, 0.3) };
    const shown = shownAngle(average, row, zero, 'arcsec');
    expect(shown.x.value).toBe(6);
    expect(shown.y_arcsec).toBeCloseTo(-2.2, 12);
    expect(shown.x.u).toBeCloseTo(Math.hypot(0.07, 0.05), 12);
    expect(shown.y.u).toBeNull(); // not known of this row: better none than another's
  });

  it('subtracts the zero as an angle before the tangent is taken', () => {
    const steep = { ...average, x_arcsec: 46 * 3600 };
    const shown = shownAngle(steep, newest, { ...zero, x_arcsec: 3600 }, 'mm/m');
    expect(shown.x.value).toBeCloseTo(1000, 9);
  });
});

describe('the position shown', () => {
  it('claims no more than the scatter, as neighbouring readings are not independent', () => {
    const shown = shownPosition(
      { n: 25, mean: 320.5, sd: 0.1 },
      { n: 25, mean: 240, sd: 0.1 },
      newest,
      1,
    );
    expect(shown.x).toEqual({ value: 320.5, noise: 0.1, u: 0.1 });
    expect(shown.unit).toBe('px');
  });

  it('is nothing while the newest picture shows nothing', () => {
    const spread = { n: 25, mean: 320.5, sd: 0.1 };
    expect(shownPosition(spread, spread, { ...newest, x_px: null }, 1).x.value).toBeNull();
  });
});
