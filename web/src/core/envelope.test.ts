import { describe, expect, it } from 'vitest';
import { alone, envelopeOf } from './envelope';
import type { Series } from './runs';

const SERIES: Series = {
  bin_s: 10,
  t_s: [5, 15, 25, 35],
  n: [3, 0, 3, 1],
  x_min_arcsec: [1, null, 2, 4],
  x_max_arcsec: [3, null, 4, 4],
  x_mean_arcsec: [2, null, 3, null],
  y_min_arcsec: [-11, null, -12, -10],
  y_max_arcsec: [-9, null, -10, -10],
  y_mean_arcsec: [-10, null, -11, -10],
};

describe('the envelope of a run', () => {
  const lanes = envelopeOf(SERIES, 'arcsec', 4);
  const [, x, y, x_low, x_high, y_low, y_high] = lanes.data;

  it('keeps gaps, and what was measured without being trusted has no mean', () => {
    expect(x?.map((v) => v === null)).toEqual([false, true, false, true]);
    expect(x_high?.map((v) => v === null)).toEqual([false, true, false, false]);
    expect(lanes.gaps).toEqual([{ from_s: 5, to_s: 25, missing: 'reading' }]);
  });

  it('draws both axes at one scale, X above Y, all of it within its lane', () => {
    const height = (low: number | null | undefined, high: number | null | undefined): number =>
      (high ?? 0) - (low ?? 0);
    expect(height(x_low?.[0], x_high?.[0])).toBeCloseTo(2 / lanes.span, 9);
    expect(height(y_low?.[0], y_high?.[0])).toBeCloseTo(2 / lanes.span, 9);
    expect(Math.min(...(x_low ?? []).filter((v) => v !== null))).toBeGreaterThanOrEqual(1);
    expect(Math.max(...(y_high ?? []).filter((v) => v !== null))).toBeLessThanOrEqual(1);
    expect(Math.min(...(y_low ?? []).filter((v) => v !== null))).toBeGreaterThanOrEqual(0);
    expect(y?.[0]).toBeCloseTo(((y_low?.[0] ?? 0) + (y_high?.[0] ?? 0)) / 2, 9);
  });
});

it('finds values that stand alone', () => {
  expect(alone([1, null, 2, 3, null, 4])).toEqual([0, 5]);
  expect(alone([])).toEqual([]);
});
