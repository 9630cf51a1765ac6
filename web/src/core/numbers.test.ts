import { describe, expect, it } from 'vitest';
import {
  decimalsFor,
  decimalsNear,
  placeOf,
  plain,
  signed,
  slotsOf,
  smallUncertainty,
  uncertainty,
  wholesOf,
} from './numbers';

describe('decimals', () => {
  // JCGM 100:2008, 7.2.6: two significant digits of the standard uncertainty; its example of
  // 10.057 62 ohm with a combined uncertainty of 27 milliohm becomes 10.058(27).
  it('gives two significant digits of the uncertainty', () => {
    expect(decimalsFor(0.027)).toBe(3);
    expect(signed(10.05762, decimalsFor(0.027))).toBe('+10.058');
    expect(uncertainty(0.0274)).toBe('0.027');
    expect(decimalsFor(1.3)).toBe(1);
    expect(decimalsFor(35)).toBe(0);
  });

  it('beside larger ones does not fill the line with noughts', () => {
    expect(smallUncertainty(0.0274)).toBe('0.027');
    expect(smallUncertainty(0.00067)).toBe('0.0007');
    expect(smallUncertainty(0.0000001)).toBe('< 0.0001');
    expect(smallUncertainty(0)).toBe('0');
  });

  it('has a bound, also without an uncertainty', () => {
    expect(decimalsFor(1e-9, 4)).toBe(4);
    for (const none of [null, 0, -1, Number.NaN]) expect(decimalsFor(none, 3)).toBe(3);
  });

  it('stays while the noise only hovers about the change', () => {
    expect(decimalsNear(0.0101, 4, 5)).toBe(4);
    expect(decimalsNear(0.0099, 3, 5)).toBe(3);
    expect(decimalsNear(0.02, 4, 5)).toBe(3);
    expect(decimalsNear(0.004, 3, 5)).toBe(4);
  });
});

describe('printing', () => {
  it('uses a true minus and thin spaces between thousands', () => {
    expect(signed(-1234.5, 1)).toBe('\u22121\u2009234.5');
    expect(signed(1234567, 0)).toBe('+1\u2009234\u2009567');
    expect(plain(999, 0)).toBe('999');
  });

  it('claims no direction its digits do not show', () => {
    expect(signed(-0.0004, 3)).toBe('+0.000');
    expect(signed(-0.0006, 3)).toBe('\u22120.001');
  });

  it('shows an en dash for what is not there', () => {
    for (const none of [null, Number.NaN, Infinity]) expect(signed(none, 2)).toBe('–');
  });
});

describe('slots', () => {
  const text = (...of: Parameters<typeof slotsOf>): string =>
    slotsOf(...of)
      .map((slot) => slot.character)
      .join('');

  it('has the same count for every value of as many places', () => {
    const counts = [12.8476, -3.2, 0, null, -999.9999].map(
      (value) => slotsOf(value, 3, 4, 0.01).length,
    );
    expect(new Set(counts)).toEqual(new Set([1 + 3 + 1 + 4]));
  });

  it('puts points under one another', () => {
    const at = (value: number): number =>
      slotsOf(value, 3, 2, null).findIndex((slot) => slot.kind === 'point');
    expect(at(-3.2)).toBe(at(123.45));
  });

  it('reads as the number does', () => {
    expect(text(-3.206, 3, 3, 0.01)).toBe('−3.206');
    expect(text(null, 3, 3, 0.01)).toBe('–');
  });

  it('marks digits below the standard uncertainty, on both sides of the point', () => {
    const below = (value: number, u: number): string =>
      slotsOf(value, 3, 3, u)
        .filter((slot) => slot.below)
        .map((slot) => slot.character)
        .join('');
    expect(below(12.847, 0.012)).toBe('7');
    expect(below(12.847, 0.35)).toBe('47');
    expect(below(112.847, 13)).toBe('2.847');
    expect(below(12.847, 0.0004)).toBe('');
  });

  it('asks for a thin space in front of each group of three', () => {
    const spaced = slotsOf(1234567, 7, 0, null).filter((slot) => slot.spaced);
    expect(spaced.map((slot) => slot.character)).toEqual(['2', '5']);
  });

  it('counts digits after rounding', () => {
    expect(wholesOf(9.996, 2)).toBe(2);
    expect(wholesOf(-9.994, 2)).toBe(1);
    expect(placeOf(0.012)).toBe(-2);
  });
});
